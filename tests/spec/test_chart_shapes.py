"""Which keys stand where in a chart file."""

import pytest

from runner.spec import chart_shapes
from runner.spec.shape import Shape
from runner.spec.tree import Complaints, parse


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (chart_shapes.PieceShape, "name: a", "lacks the key 'serial'"),
        (chart_shapes.PieceShape, "name: a, serial: 1, seen: upside down", "'upside down' is not allowed here"),
        (chart_shapes.MarksShape, "diameter: 9 px, at: [[1 mm, 1 mm]]", "unit px does not fit"),
        (chart_shapes.ViewShape, "tilt: at most 3 %", "tilt is given in %"),
        (chart_shapes.ViewShape, "turned: 3 mm", "unit mm does not fit"),
        (chart_shapes.FeatureShape, "kind: a, position: [1 mm, 1 mm], size: [0 mm, 1 mm]", "lie above zero"),
        (
            chart_shapes.FeatureShape,
            "kind: a, position: [1 mm, 1 mm], size: [1 mm, 1 mm], transfer_uncertainty: 1 %",
            "a transfer table that is not there",
        ),
    ],
)
def test_what_a_mapping_may_not_say(kind: type[Shape], text: str, told: str) -> None:
    """Keys that lack, exclude or need each other are told, once."""
    complaints = Complaints()
    kind.model_validate(parse(f"{{{text}}}", "chart.yaml", complaints), context=complaints)

    found = [str(one) for one in complaints.sorted("error")]
    assert len(found) == 1
    assert told in found[0]


def test_the_order_of_features_is_kept() -> None:
    """Features come back in the order of the file, in the file's form and in the expanded one."""
    text = "b: {kind: k, position: [1 mm, 1 mm], size: [1 mm, 1 mm]}"
    complaints = Complaints()
    tree = parse(f"features: {{{text}, {text.replace('b', 'a', 1)}}}", "chart.yaml", complaints)
    shape = chart_shapes.ChartFileShape.model_validate(tree, context=complaints)

    assert list(shape.features or {}) == ["b", "a"]
    dumped = shape.model_dump(mode="json", by_alias=True, exclude_unset=True)["features"]
    assert [list(one) for one in dumped] == [["b"], ["a"]]
