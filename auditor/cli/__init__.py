"""The command line: a command parses, calls one library function, prints."""
