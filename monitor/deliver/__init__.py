"""Where notices go: a program, an HTTP address, a syslog receiver. Nothing here waits; every failure is told once."""
