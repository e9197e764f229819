"""The command line: one module a command. Nothing but click is imported until one runs."""
