"""What every target and method offers is what the contract says, and nothing that they see holds a limit."""

import dataclasses
import inspect
import typing
from collections.abc import Callable, Iterator
from contextlib import suppress
from typing import Any

import pytest

from runner.errors import UsageError
from runner.measure import contract, shelf
from runner.measure.contract import Method, Sample, Target
from runner.measure.reading import Reading
from runner.spec import units

TARGETS, METHODS = shelf.targets(), shelf.methods()
EVERY = {f"target {name}": module for name, module in TARGETS.items()} | {
    f"method {name}": module for name, module in METHODS.items()
}


def _parameters(function: Callable[..., Any]) -> list[str]:
    return [name.lstrip("_") for name in inspect.signature(function).parameters if name != "self"]


@pytest.mark.parametrize("name", EVERY)
def test_a_module_offers_what_the_contract_names(name: str) -> None:
    """Every name of the protocol is there, functions take the contract's arguments in its order."""
    module, protocol = EVERY[name], Target if name.startswith("target") else Method

    for member in protocol.__annotations__:
        assert hasattr(module, member), member
    for member, promised in inspect.getmembers(protocol, inspect.isfunction):
        if not member.startswith("_"):
            assert _parameters(getattr(module, member)) == _parameters(promised), member


@pytest.mark.parametrize("name", EVERY)
def test_options_are_closed_records_with_a_sentence_each(name: str) -> None:
    """Nothing asked gives the defaults where there are any; every key has its meaning; the record is frozen."""
    module = EVERY[name]
    for field in dataclasses.fields(module.Options):
        assert str(field.metadata.get("sentence", "")).endswith("."), field.name
    options = None
    with suppress(UsageError):  # a chart of patches has neither layout nor values by default
        options = module.read_options({})
    if options is None:
        return
    assert isinstance(options, module.Options)
    assert options == module.read_options({})
    for field in dataclasses.fields(options):
        with pytest.raises(dataclasses.FrozenInstanceError, match="cannot assign"):
            setattr(options, field.name, None)


@pytest.mark.parametrize("name", METHODS)
def test_listed_quantities_are_known_with_their_units(name: str) -> None:
    """What a method lists it also knows by name, in a unit of the closed list; a name it does not yield it denies."""
    method = METHODS[name]

    assert method.quantities()
    for quantity, info in method.quantities().items():
        assert method.quantity(quantity) == info
        assert info.sentence.endswith(".")
        for unit in (info.unit, *info.parameters.values()):
            assert unit in units.UNITS
    assert method.quantity("no such quantity") is None


@pytest.mark.parametrize("name", TARGETS)
def test_default_methods_of_a_target_can_use_what_it_offers(name: str) -> None:
    """The methods that run when the spec names none exist, and need nothing that the target does not offer."""
    target = TARGETS[name]

    for method in target.METHODS:
        assert METHODS[method].NEEDS <= target.OFFERS


def _records(kind: Any, seen: set[type]) -> Iterator[type]:
    """Yield every record that can be reached from a type through its fields."""
    for inner in typing.get_args(kind):
        yield from _records(inner, seen)
    if isinstance(kind, type) and dataclasses.is_dataclass(kind) and kind not in seen:
        seen.add(kind)
        yield kind
        for hint in typing.get_type_hints(kind).values():
            yield from _records(hint, seen)


def test_a_measurement_never_sees_a_limit() -> None:
    """Nothing that can be reached from a sample or a reading, through all records, carries a limit or a rule."""
    for start in (Sample, Reading):
        found = list(_records(start, set()))
        names = {field.name for record in found for field in dataclasses.fields(record)}

        assert {"Amount"} <= {record.__name__ for record in found}
        assert not names & {"at_least", "at_most", "nominal", "tolerance", "rule", "limits", "conformance_probability"}
    assert {"Camera", "Optics", "Wanted", "Crop"} <= {record.__name__ for record in _records(Sample, set())}


def test_every_record_of_the_contract_is_frozen() -> None:
    """What passes between targets, session and methods cannot be changed on its way."""
    records = [kind for _, kind in inspect.getmembers(contract, dataclasses.is_dataclass) if inspect.isclass(kind)]

    assert len(records) >= 6
    assert all(kind.__dataclass_params__.frozen for kind in records)  # type: ignore[attr-defined]
