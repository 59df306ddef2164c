"""Curves and maps survive the way through JSON."""

import json

from runner.measure.reading import Curve, Map
from runner.report.plotted import curve_back, curve_data, map_back, map_data


def test_curves_and_maps_come_back_as_they_went() -> None:
    """Every field comes back with its type, empty ones too, through text as a file holds it."""
    curve = Curve("centre", "mtf", (0.0, 0.1), (1.0, 0.9), (), "cy/px", "1", "chart", 2, "red", "joint fit")
    area = Map(
        "", "shading", (1.0, 2.0), (3.0,), ((0.5, 0.25),), "px", "1", ((1.0, 3.0, "darkest"),), "flat", 3, "blue"
    )

    assert curve_back(json.loads(json.dumps(curve_data(curve)))) == curve
    assert map_back(json.loads(json.dumps(map_data(area)))) == area
