"""One file per command: parse, call one function, print."""
