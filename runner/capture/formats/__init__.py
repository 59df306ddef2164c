"""One file format per module; each offers `decode(data, where, camera)` and refuses what is not whole."""
