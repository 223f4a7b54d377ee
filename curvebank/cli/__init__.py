"""The command line: each command opens, calls one use case, prints."""
