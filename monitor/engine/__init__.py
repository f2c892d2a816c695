"""The whole decision as one function: step(state, stimulus) -> facts. No clock, no files, no processes.

The caller owns the state and hands every moment in; the same stimuli always lead to the same facts.
"""
