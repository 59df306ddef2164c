"""Frames: files found by pattern, read once, whole or refused."""
