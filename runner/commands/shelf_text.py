"""What the shelves hold, in words for the terminal."""

import difflib
from collections.abc import Mapping
from dataclasses import MISSING, fields
from typing import Any

from runner.errors import UsageError


def tell(kind: str, modules: Mapping[str, Any], name: str | None) -> None:
    """Print the list of modules, or everything about one.

    Raises:
        UsageError: There is no module of that name.
    """
    if name is None:
        for module in modules.values():
            print(f"{module.NAME:20} {module.TITLE}")
        return
    if name not in modules:
        near = difflib.get_close_matches(name, list(modules), n=1)
        hint = f"did you mean '{near[0]}'?" if near else ""
        raise UsageError(f"unknown {kind} '{name}'", allowed=f"known are: {', '.join(sorted(modules))}", next_step=hint)
    print("\n".join(_about(modules[name])))


def _about(module: Any) -> list[str]:
    lines = [f"{module.NAME}: {module.TITLE}", "", (module.__doc__ or "").strip()]
    if hasattr(module, "quantities"):
        lines += ["", "Quantities"]
        for quantity, info in module.quantities().items():
            needs = "".join(f", needs {parameter} ({unit})" for parameter, unit in info.parameters.items())
            lines.append(f"  {quantity} ({info.unit}{needs}): {info.sentence}")
    options = fields(module.Options)
    lines += ["", "Options"] + [
        f"  {f.name} (default {_default(f)}): {f.metadata.get('sentence', '')}" for f in options
    ]
    if not options:
        lines.append("  none")
    return [*lines, "", "References", *(f"  {reference}" for reference in module.REFERENCES)]


def _default(option: Any) -> str:
    return "none" if option.default is MISSING else str(option.default)
