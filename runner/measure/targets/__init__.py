"""Shelf of targets: one file per kind of scene; the folder is the list."""
