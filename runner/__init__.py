"""Acceptance tests for cameras and microscopes, in five layers that import only to their left.

`spec` reads what is asked; `capture` reads frames, whole or refused; `measure` turns regions into readings with their
uncertainty and never sees a limit; `judge` turns readings and limits into verdicts and blame; `report` writes them
down as JSON, HTML and PDF, signs and verifies. `acceptance` is the whole run as five calls.
"""

__version__ = "0.1.0"
