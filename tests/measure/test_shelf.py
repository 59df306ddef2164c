"""The shelves hold what lies in their folders, and refuse what breaks the contract."""

from types import ModuleType

import pytest

from runner.errors import ShelfError
from runner.measure import shelf


def _module(**names: object) -> ModuleType:
    module = ModuleType("example")
    module.__file__ = "example.py"
    for name, value in names.items():
        setattr(module, name, value)
    return module


def test_the_shelves_are_filled_from_their_folders() -> None:
    """A target or method is there because its file is there."""
    assert {"slanted edge", "dark frame", "flat field"} <= set(shelf.targets())
    assert {"edge response", "exposure"} <= set(shelf.methods())


def test_a_module_that_lacks_a_name_is_refused() -> None:
    """A module without one of the contract's names stops the run and is named."""
    with pytest.raises(ShelfError, match=r"example\.py: it lacks TITLE"):
        shelf._admit(_module(NAME="x"), ("NAME", "TITLE"), {})


def test_a_used_name_is_refused() -> None:
    """Two modules of one name stop the run, naming both files."""
    taken = {"x": _module(NAME="x")}

    with pytest.raises(ShelfError, match=r"its name 'x' is taken by example\.py"):
        shelf._admit(_module(NAME="x"), ("NAME",), taken)


def test_a_module_that_fails_to_load_is_named() -> None:
    """An import that fails stops the run and tells module and cause."""
    with pytest.raises(ShelfError, match=r"runner\.measure\.nothing: it fails to load: ModuleNotFoundError"):
        shelf._load("runner.measure.nothing")
