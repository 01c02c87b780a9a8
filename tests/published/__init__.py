"""Figures that others have published, and what the program must make of them."""
