"""Independent tests of a result; one module per check."""
