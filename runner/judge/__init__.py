"""Verdicts and blame from readings and limits."""
