"""The command line: thin commands that parse, call one library function, and print."""
