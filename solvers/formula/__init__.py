"""Formulas as on paper: text to tree and back, without any numerical library."""
