"""Equivalent forms of a problem that are solved better, and the way back to the terms of the problem as stated."""
