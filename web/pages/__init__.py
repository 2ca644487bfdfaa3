"""One module per page: its context, a frozen record with a help text per field, and what fills it from plain data."""
