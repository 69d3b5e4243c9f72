"""One thin module per command: parse, call one library function, format."""
