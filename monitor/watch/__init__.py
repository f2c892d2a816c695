"""What watching concludes from refits and readings: pure functions, state in, state out."""
