"""The daemon: clock, worker process, loop. The only place below the command line that waits for anything."""
