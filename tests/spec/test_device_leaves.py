"""Values of camera, chart, unit and files."""

from typing import Any

import pytest
from pydantic import TypeAdapter

from runner.spec import device_leaves
from runner.spec.device_leaves import Chosen
from runner.spec.model import Amount, Tone
from runner.spec.tree import Complaints, parse


def _node(text: str) -> Any:
    complaints = Complaints()
    tree = parse(f"a: {text}\n", "f", complaints)
    complaints.raise_errors()
    assert tree is not None
    return tree["a"]


ONE, HALF = Amount(1.0, "1"), Amount(0.5, "1")


@pytest.mark.parametrize(
    ("kind", "text", "value", "written"),
    [
        (device_leaves.FrameSize, "1600x1200 px", (1600, 1200), "1600 x 1200 px"),
        (device_leaves.FrameSize, "1600 × 1200 px", (1600, 1200), "1600 x 1200 px"),
        (device_leaves.Bits, "12bit", 12, "12 bit"),
        (device_leaves.ToneLeaf, "srgb", Tone("srgb"), "srgb"),
        (device_leaves.ToneLeaf, "gamma 2.20", Tone("gamma", 2.2), "gamma 2.2"),
        (
            device_leaves.ToneLeaf,
            "{table: [[0, 0], [50 %, 0.2], [1, 1]]}",
            Tone("table", table=((0.0, 0.0), (0.5, 0.2), (1.0, 1.0))),
            {"table": [[0.0, 0.0], [0.5, 0.2], [1.0, 1.0]]},
        ),
        (device_leaves.Processing, "none", (), "none"),
        (device_leaves.Processing, "sharpened", ("sharpened",), ["sharpened"]),
        (
            device_leaves.Transfer,
            "[[0 lp/mm, 1], [50 lp/mm, 50 %]]",
            ((Amount(0.0, "lp/mm"), ONE), (Amount(50.0, "lp/mm"), HALF)),
            [["0 lp/mm", 1.0], ["50 lp/mm", 0.5]],
        ),
        (device_leaves.Methods, "[b, a]", Chosen({"a": {}, "b": {}}), {"a": {}, "b": {}}),
        (
            device_leaves.Methods,
            "{edge response: {search: 10 px, order: 3, curved: true, id: 010}}",
            Chosen({"edge response": {"search": "10 px", "order": 3, "curved": True, "id": "010"}}),
            {"edge response": {"search": "10 px", "order": 3, "curved": True, "id": "010"}},
        ),
        (device_leaves.TargetLeaf, "slanted edge", Chosen({"slanted edge": {}}), "slanted edge"),
        (device_leaves.TargetLeaf, "{slanted edge: {search: 4}}", Chosen({"slanted edge": {"search": 4}}), None),
    ],
)
def test_a_leaf_reads_and_writes_back(kind: Any, text: str, value: object, written: object) -> None:
    """A value is read into its record, and written for the expanded form so that it reads back."""
    adapter: TypeAdapter[Any] = TypeAdapter(kind)

    assert adapter.validate_python(_node(text)) == value
    assert written is None or adapter.dump_python(value, mode="json") == written


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (device_leaves.FrameSize, "0 x 1200 px", "'0 x 1200 px' is no frame size"),
        (device_leaves.Bits, "0 bit", "'0 bit' is no bit depth"),
        (device_leaves.ToneLeaf, "gamma 0", "'gamma 0' is no tone curve"),
        (device_leaves.ToneLeaf, "{table: [[0, 0]]}", "a table is a list of two or more pairs"),
        (device_leaves.ToneLeaf, "{table: [[0, 0], [1 px, 1]]}", "has the wrong units"),
        (device_leaves.Processing, "[none, sharpened]", "'none' is no known processing"),
        (device_leaves.Transfer, "[[0 cy/px, 1], [10 lp/mm, 1]]", "different units"),
        (device_leaves.Transfer, "[[0 cy/px, 1], [0.1 cy/px, 1.2]]", "lies outside (0, 1.05]"),
        (device_leaves.Names, "'a?.tif'", "holds a character with no meaning here"),
        (device_leaves.Names, "/frames/a.tif", "leaves the unit's folder"),
        (device_leaves.Names, "'C:a.tif'", "leaves the unit's folder"),
        (device_leaves.Methods, "{edge response: 3}", "the options of 'edge response' are '3'"),
        (device_leaves.TargetLeaf, "[a, b]", "a capture has one target"),
    ],
)
def test_a_leaf_refuses(kind: Any, text: str, told: str) -> None:
    """What does not fit is refused with what was found."""
    with pytest.raises(ValueError, match="validation error") as caught:
        TypeAdapter(kind).validate_python(_node(text))

    assert told in str(caught.value)
