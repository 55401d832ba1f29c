"""The command line: one module per command, no statistics inside."""
