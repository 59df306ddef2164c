"""Shelf of methods: one file per measurement; the folder is the list."""
