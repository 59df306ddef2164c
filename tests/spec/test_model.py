"""The resolved records."""

import pytest

from runner.spec.model import Amount, Camera, Document, Optics, Region, Spec, UnitRule


def _region(x: Amount, y: Amount, width: Amount, height: Amount) -> Region:
    return Region("a", (x, y), (width, height))


def test_percent_and_pixels_of_a_frame() -> None:
    """Percent are of the frame's own side: x of its width, y of its height; 100 % is the outer border."""
    region = _region(Amount(25.0, "%"), Amount(100.0, "%"), Amount(80.0, "px"), Amount(10.0, "%"))

    assert region.centre_px(1600, 1200) == (400.0, 1200.0)
    assert region.size_px(1600, 1200) == (80, 120)


def test_a_pixel_cannot_collect_outside_itself() -> None:
    """The fill is a share in (0, 1]."""
    for fill in (0.0, 1.1, -0.5):
        with pytest.raises(ValueError, match=r"fill must lie in \(0, 1\]"):
            Camera(1600, 1200, 12, 64.0, 4095.0, fill=fill)


def test_a_spec_knows_its_captures_and_places() -> None:
    """A capture is found by its name, a place by its words; what is not there is said so."""
    camera = Camera(1600, 1200, 12, 64.0, 4095.0)
    places = {"captures, chart": "spec.yaml:5:3"}
    spec = Spec(Document("1", "A"), UnitRule("WS8", "x"), camera, Optics(), (), (), {}, "", "spec.yaml", (), places)

    with pytest.raises(KeyError, match="chart"):
        spec.capture("chart")
    assert spec.place("spec.yaml: captures, chart") == "spec.yaml:5:3"
    assert spec.place("captures, dark") == "spec.yaml: captures, dark"
