"""The same problem for many values of one or two constants, each solved from its solved neighbour."""
