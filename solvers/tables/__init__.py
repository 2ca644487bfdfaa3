"""Measured functions: points in, smooth functions with exact derivatives out."""
