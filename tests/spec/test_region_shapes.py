"""Which keys of a region go together."""

import pytest

from runner.spec.region_shapes import GridShape, RegionShape
from runner.spec.shape import Shape
from runner.spec.tree import Complaints, parse


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (RegionShape, "on: frame, position: {field: 1, azimuth: 0 deg}, size: [9 %, 9 %]", "under on: frame"),
        (RegionShape, "on: chart, position: [9 %, 9 mm], size: [9 mm, 9 mm]", "9 % is no length on the chart"),
        (RegionShape, "position: [9 %, 9 mm], size: [9 %, 9 %]", "9 mm is a length on a chart"),
        (
            RegionShape,
            "position: [9 %, 9 %], feature: a, size: [9 px, 9 px]",
            "a position or a grid or a feature",
        ),
        (RegionShape, "feature: a, on: frame", "stands under on: frame"),
        (RegionShape, "position: [9 %, 9 %]", "lacks the key 'size'"),
        (RegionShape, "on: chart, position: [9 mm, 9 mm], size: [9 mm, 9 px]", "one side is in px and one in mm"),
        (RegionShape, "on: chart, position: {field: 1, azimuth: 0 deg}, size: [9 mm, 9 mm]", "under on: chart"),
        (GridShape, "columns: 3, rows: 2, from: [9 %, 9 %]", "lacks the key 'to'"),
    ],
)
def test_what_a_region_may_not_say(kind: type[Shape], text: str, told: str) -> None:
    """Keys that exclude or need each other are told, once."""
    complaints = Complaints()
    kind.model_validate(parse(f"{{{text}}}", "spec.yaml", complaints), context=complaints)

    found = [str(one) for one in complaints.sorted("error")]
    assert len(found) == 1
    assert told in found[0]
