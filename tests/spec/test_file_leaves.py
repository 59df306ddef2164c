"""Values of what a spec states about files."""

from typing import Any

import pytest
from pydantic import TypeAdapter

from runner.spec import file_leaves
from runner.spec.leaves import Inequality
from runner.spec.model import Amount
from runner.spec.tree import Complaints, parse


def _node(text: str) -> Any:
    complaints = Complaints()
    tree = parse(f"a: {text}\n", "f", complaints)
    complaints.raise_errors()
    assert tree is not None
    return tree["a"]


def _between(low: float | None, high: float | None, unit: str) -> Inequality:
    ends = (None if end is None else Amount(end, unit) for end in (low, high))
    return Inequality(*ends)


@pytest.mark.parametrize(
    ("kind", "text", "value", "written"),
    [
        (file_leaves.Bytes, "512 bytes", 512, "512 bytes"),
        (file_leaves.Bytes, "0", 0, "0 bytes"),
        (file_leaves.DatasetPath, "/entry/frames/", "entry/frames", "entry/frames"),
        (file_leaves.Fields, "[time, serial]", ("serial", "time"), ["serial", "time"]),
        (file_leaves.Fields, "counter", ("counter",), ["counter"]),
        (file_leaves.Exposure, "2 ms", _between(2, 2, "ms"), "2 ms"),
        (file_leaves.Exposure, "from 1.9 to 2.1 ms", _between(1.9, 2.1, "ms"), "from 1.9 ms to 2.1 ms"),
        (file_leaves.Gain, "4", _between(4, 4, "1"), 4.0),
        (file_leaves.Temperature, "at most 30 degC", _between(None, 30, "°C"), "at most 30 °C"),
        (file_leaves.Temperature, "from -5 °C to 5 °C", _between(-5, 5, "°C"), "from -5 °C to 5 °C"),
        (file_leaves.AnyValue, "50 %", _between(50, 50, "%"), "50 %"),
    ],
)
def test_a_leaf_reads_and_writes_back(kind: Any, text: str, value: object, written: object) -> None:
    """A value is read into its record, and written for the expanded form so that it reads back."""
    adapter: TypeAdapter[Any] = TypeAdapter(kind)

    assert adapter.validate_python(_node(text)) == value
    assert adapter.dump_python(value, mode="json") == written


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (file_leaves.Bytes, "512", "'512' is no number of bytes"),
        (file_leaves.Bytes, "1.5 bytes", "'1.5 bytes' is no number of bytes"),
        (file_leaves.Bytes, "9999999999 bytes", "is no number of bytes"),
        (file_leaves.DatasetPath, "a/../b", "'a/../b' is no path of a dataset"),
        (file_leaves.Fields, "[serial, serial]", "stands in the list twice"),
        (file_leaves.Exposure, "2", "'2' has no unit here"),
        (file_leaves.Exposure, "at most 2 K", "unit K does not fit here"),
        (file_leaves.Temperature, "20 K", "unit K does not fit here"),
        (file_leaves.Gain, "6 DN", "unit DN does not fit here"),
    ],
)
def test_a_leaf_refuses(kind: Any, text: str, told: str) -> None:
    """What does not fit is refused with what was found."""
    with pytest.raises(ValueError, match="validation error") as caught:
        TypeAdapter(kind).validate_python(_node(text))

    assert told in str(caught.value)
