"""Where a search starts, and what different starts lead to."""
