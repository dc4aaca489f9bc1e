"""The command line: one file per command, each thin: parse, call, show."""
