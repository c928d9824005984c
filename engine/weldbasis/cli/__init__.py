"""The command line: one module a command, read from `main`."""
