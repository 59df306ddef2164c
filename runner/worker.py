"""What a worker process needs, loaded once before workers are forked; see `processes`.

Whatever fails to load fails again, with its own words, in the worker that needs it.
"""

import contextlib
import importlib

from runner.errors import ProbatumError
from runner.measure import shelf

NEEDED = (
    "runner.acceptance",
    "runner.report.pictures",
    "runner.report.unit_files",
    "weasyprint",
    "pyhanko.sign.signers",
    "jinja2",
    "PIL.ImageFont",
)
"""Modules that a unit's measurement and report load in the end."""

for _name in NEEDED:
    with contextlib.suppress(ImportError):
        importlib.import_module(_name)
with contextlib.suppress(ProbatumError):
    shelf.targets()
    shelf.methods()
