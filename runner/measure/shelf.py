"""The two shelves: every module in `targets/` and `methods/`, and those of third parties by entry point.

A module that fails to load, lacks a name or takes a used one stops the run, naming the file: a method that is skipped
quietly would leave units untested.
"""

import importlib
import importlib.metadata
import pkgutil
from collections.abc import Mapping
from functools import cache
from types import ModuleType
from typing import cast

import runner.measure.methods
import runner.measure.targets
from runner.errors import ShelfError
from runner.measure.contract import Method, Target

TARGET_NAMES = ("NAME", "TITLE", "OFFERS", "METHODS", "REFERENCES", "Options", "read_options", "locate")
METHOD_NAMES = ("NAME", "TITLE", "NEEDS", "REFERENCES", "Options", "read_options", "quantity", "quantities", "measure")


@cache
def targets() -> Mapping[str, Target]:
    """Return the targets by their names.

    Raises:
        ShelfError: A module cannot be used.
    """
    shelf = _fill(runner.measure.targets, "probatum.targets", TARGET_NAMES)
    return {name: cast("Target", module) for name, module in shelf.items()}


@cache
def methods() -> Mapping[str, Method]:
    """Return the methods by their names.

    Raises:
        ShelfError: A module cannot be used.
    """
    shelf = _fill(runner.measure.methods, "probatum.methods", METHOD_NAMES)
    return {name: cast("Method", module) for name, module in shelf.items()}


def _fill(package: ModuleType, group: str, names: tuple[str, ...]) -> dict[str, ModuleType]:
    modules = [f"{package.__name__}.{entry.name}" for entry in pkgutil.iter_modules(package.__path__)]
    modules += [entry.value for entry in importlib.metadata.entry_points(group=group)]
    shelf: dict[str, ModuleType] = {}
    for path in sorted(modules):
        module = _load(path)
        _admit(module, names, shelf)
    return shelf


def _load(path: str) -> ModuleType:
    try:
        return importlib.import_module(path)
    except Exception as error:
        raise ShelfError(
            f"it fails to load: {type(error).__name__}: {error}", where=path, next_step="mend or remove the module"
        ) from error


def _admit(module: ModuleType, names: tuple[str, ...], shelf: dict[str, ModuleType]) -> None:
    where = module.__file__ or module.__name__
    missing = [name for name in names if not hasattr(module, name)]
    if missing:
        raise ShelfError(f"it lacks {', '.join(missing)}", where=where, allowed=f"a module offers {', '.join(names)}")
    if module.NAME in shelf:
        raise ShelfError(
            f"its name '{module.NAME}' is taken by {shelf[module.NAME].__file__}",
            where=where,
            next_step="give it a name of its own",
        )
    shelf[module.NAME] = module
