"""A small chart file of an invented chart, and how faults are planted in it."""

from pathlib import Path

CHART = """\
probatum-chart: 1
chart: {name: Small board, serial: SB-01, calibrated: 2026-03-01, due: 2027-03-01, uses: 12, most_uses: 400}
size: [200 mm, 150 mm]
greys: {ground: 80 %, ink: 8 %}
marks:
  diameter: 8 mm
  at:
    - [-92 mm, -56 mm]
    - [49 mm, -66 mm]
    - [91 mm, -28 mm]
    - [92 mm, 43 mm]
    - [57 mm, 65 mm]
    - [-52 mm, 64 mm]
    - [-90 mm, 54 mm]
    - [-91 mm, 0 mm]
    - [10 mm, 20 mm]
view: {scale: at least 2 px/mm, keystone: at most 10 %}
features:
  left edge: {kind: slanted edge, position: [-50 mm, 0 mm], size: [40 mm, 60 mm], data: {angle: 5 deg}}
  right stripes:
    kind: sinusoidal grating
    position: [55 mm, 10 mm]
    size: [40 mm, 50 mm]
    data: {period: 2 mm, angle: 12 deg, mean: 45 %, target_modulation: 70 %}
    calibrated: {target_modulation: 68.4 %, target_modulation_uncertainty: 0.6 %}
    transfer: [[0.5 lp/mm, 1.0], [2 lp/mm, 0.9]]
    transfer_uncertainty: 0.01
"""
"""Draws no complaint."""


def write_chart(folder: Path, text: str = CHART, name: str = "chart.yaml") -> Path:
    """Write a chart's text to a file of a folder and return its path."""
    path = folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    return path


def changed(old: str, new: str) -> str:
    """Return the chart's text with one part replaced."""
    assert CHART.count(old) == 1, old
    return CHART.replace(old, new)
