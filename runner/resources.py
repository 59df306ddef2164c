"""Finds the files that travel with the program: templates, fonts, ready specs, demo lots.

In a source tree (also an editable install) they lie beside the package at the top level; in a wheel, inside it.
"""

from pathlib import Path

from runner.errors import UsageError

_PACKAGE = Path(__file__).resolve().parent


def folder(name: str) -> Path:
    """Return the folder `templates`, `specs` or `demo_lots`.

    Args:
        name: The folder's name at the top level of the project.

    Raises:
        UsageError: The installation lacks it.
    """
    for place in (_PACKAGE / "data" / name, _PACKAGE.parent / name):
        if place.is_dir():
            return place
    raise UsageError(f"the installation lacks its folder '{name}'", next_step="install probatum again")
