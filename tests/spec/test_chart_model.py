"""Records of chart files."""

from runner.spec.chart_model import ChartFile, Feature, Marks, View


def test_a_place_on_a_border_belongs_to_the_feature() -> None:
    """A place lies in a feature's box up to its border, and calibrated values go before nominal ones."""
    one = Feature(
        "step", "flat field", (10.0, -5.0), (4.0, 2.0), {"reflectance": "40 %", "n": 1}, {"reflectance": "39 %"}
    )
    chart = ChartFile("a", "1", (99.0, 99.0), 0.9, 0.1, Marks(5.0, 2.5, ()), {"step": one}, View(), "sha256:")

    assert chart.within((12.0, -6.0)) is one
    assert chart.within((12.1, -6.0)) is None
    assert one.values == {"reflectance": "39 %", "n": 1}
