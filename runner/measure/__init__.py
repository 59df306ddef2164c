"""Readings with their uncertainty: targets find regions, methods measure them; no limit is known here."""
