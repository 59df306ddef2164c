"""Synthetic captures through a known transfer function; every frame is marked as simulated."""
