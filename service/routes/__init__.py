"""One module per resource; a route gets, acts, answers."""
