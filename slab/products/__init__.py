"""One module per answer."""
