"""The command line: arguments to calls, results to words or JSON, errors to exit codes."""
