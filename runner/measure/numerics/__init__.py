"""Arithmetic that knows no target: edges, spectra, fits, pupils."""
