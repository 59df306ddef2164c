"""What the shelves hold, in words for the terminal."""

import ast
import difflib
import inspect
from collections.abc import Iterator, Mapping
from dataclasses import MISSING, fields
from math import isfinite
from types import ModuleType
from typing import Any

from runner.errors import UsageError

OTHER = "other"
"""Group of modules that name none."""


def tell(kind: str, modules: Mapping[str, Any], name: str | None) -> None:
    """Print a table of the modules by what they measure, or everything about one.

    Raises:
        UsageError: There is no module of that name.
    """
    if name is None:
        print("\n".join(_table(kind, modules)))
        return
    if name not in modules:
        near = difflib.get_close_matches(name, list(modules), n=1)
        hint = f"did you mean '{near[0]}'?" if near else ""
        raise UsageError(f"unknown {kind} '{name}'", allowed=f"known are: {', '.join(sorted(modules))}", next_step=hint)
    print("\n".join(_about(modules[name])))


def _table(kind: str, modules: Mapping[str, Any]) -> list[str]:
    groups: dict[str, list[tuple[str, str, str]]] = {}
    for module in modules.values():
        standard = module.REFERENCES[0].split(" (")[0] if module.REFERENCES else ""
        groups.setdefault(getattr(module, "GROUP", OTHER), []).append((module.NAME, module.TITLE, standard))
    rows = [row for group in groups.values() for row in group]
    wide, title = (max((len(row[k]) for row in rows), default=0) + 2 for k in (0, 1))
    lines = [f"{kind:{wide + 2}}{'what it is':{title}}standard or source"]
    for group in sorted(groups, key=lambda word: (word == OTHER, word)):
        lines += ["", group, *(f"  {n:{wide}}{t:{title}}{s}".rstrip() for n, t, s in sorted(groups[group]))]
    return [*lines, "", f"probatum {kind}s NAME tells units, options, refusals and sources of one."]


def _about(module: Any) -> list[str]:
    lines = [f"{module.NAME}: {module.TITLE}", "", (module.__doc__ or "").strip()]
    if hasattr(module, "OFFERS"):
        lines += [
            "",
            f"Offers {', '.join(sorted(module.OFFERS))}; usual methods: {', '.join(module.METHODS) or 'none'}",
        ]
    if hasattr(module, "NEEDS"):
        lines += ["", *_takes(module)]
    if hasattr(module, "quantities"):
        lines += ["", "Quantities", *(_quantity(name, info) for name, info in module.quantities().items())]
    options = fields(module.Options)
    lines += ["", "Options"] + [
        f"  {f.name} (default {_default(f)}): {f.metadata.get('sentence', '')}" for f in options
    ]
    if not options:
        lines.append("  none")
    lines += ["", "Not measured when", *(f"  {sentence}" for sentence in refusals(module))]
    return [*lines, "", "References", *(f"  {reference}" for reference in module.REFERENCES)]


def _takes(module: Any) -> Iterator[str]:
    yield f"Needs a region with {', '.join(sorted(module.NEEDS)) or 'anything in it'}."
    if getattr(module, "TOGETHER", False):
        yield "Takes all frames of a capture together."
    if getattr(module, "GATHERS", False):
        yield "Takes all regions of a capture, or a group of them, together, after the other methods."
    axes = sorted(getattr(module, "AXES", ()))
    if axes:
        yield f"Takes frames along {', '.join(axes)}."


def _quantity(name: str, info: Any) -> str:
    needs = "".join(f", at {parameter} ({unit})" for parameter, unit in info.parameters.items())
    ends = [f"{end:g}" if isfinite(end) else "" for end in (info.least, info.most)]
    span = f", {ends[0]} to {ends[1]}" if all(ends) else f", from {ends[0]}" if ends[0] else ""
    unit = "plain number" if info.unit == "1" else info.unit
    return f"  {name} ({unit}{span}{needs}): {info.sentence}"


def refusals(module: ModuleType) -> list[str]:
    """Return why a module gives no value: the causes that it and what it imports of the measuring code name.

    Args:
        module: A target or a method.
    """
    from runner.measure.reading import CAUSES  # noqa: PLC0415 - heavy

    near = {module} | {
        inspect.getmodule(thing) or module
        for thing in vars(module).values()
        if inspect.isfunction(thing) or inspect.isclass(thing)
    }
    words: set[str] = set()
    for one in near:
        ours = one.__name__.startswith("runner.measure.") and one.__name__ != "runner.measure.reading"
        if ours or one is module:
            words |= set(_texts(one))
    return [sentence for cause, sentence in CAUSES.items() if cause in words and cause != "fault"]


def _texts(module: ModuleType) -> Iterator[str]:
    for node in ast.walk(ast.parse(inspect.getsource(module))):
        if isinstance(node, ast.Constant) and isinstance(node.value, str):
            yield node.value


def _default(option: Any) -> str:
    return "none" if option.default is MISSING or option.default is None else str(option.default)
