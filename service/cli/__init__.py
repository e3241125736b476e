"""The command line: one module a command, loaded when its command is given."""
