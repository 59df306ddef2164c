"""Curves and maps as plain JSON data, and back."""

from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from runner.measure.reading import Curve, Map


def curve_data(curve: Curve) -> dict[str, Any]:
    """Return a curve as plain JSON data."""
    return {
        "capture": curve.capture,
        "attempt": curve.attempt,
        "region": curve.region,
        "channel": curve.channel,
        "name": curve.name,
        "estimator": curve.estimator,
        "x": list(curve.x),
        "y": list(curve.y),
        "u": list(curve.u),
        "x_in": curve.x_in,
        "y_in": curve.y_in,
    }


def curve_back(data: Mapping[str, Any]) -> Curve:
    """Return a curve out of its data."""
    return Curve(
        data["region"],
        data["name"],
        tuple(data["x"]),
        tuple(data["y"]),
        tuple(data["u"]),
        data["x_in"],
        data["y_in"],
        data["capture"],
        int(data["attempt"]),
        data["channel"],
        data["estimator"],
    )


def map_data(area: Map) -> dict[str, Any]:
    """Return a map as plain JSON data."""
    plain = {"x": list(area.x), "y": list(area.y), "values": [list(row) for row in area.values]}
    return asdict(area) | plain | {"marks": [list(mark) for mark in area.marks]}


def map_back(data: Mapping[str, Any]) -> Map:
    """Return a map out of its data."""
    rows = tuple(tuple(row) for row in data["values"])
    marks = tuple((float(x), float(y), str(words)) for x, y, words in data["marks"])
    return Map(**(dict(data) | {"x": tuple(data["x"]), "y": tuple(data["y"]), "values": rows, "marks": marks}))
