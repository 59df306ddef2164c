"""A measured tone curve linearises another capture: a chart photographed through a curve reads as in plain light."""

import numpy as np
import pytest

from runner.capture.frame import linearise
from runner.measure.reading import Curve
from runner.measure.tone import table_of
from runner.spec.model import Camera, Tone


def _curve(light: tuple[float, ...], code: tuple[float, ...]) -> Curve:
    return Curve("", "oecf", light, code, (), "1", "1")


def test_codes_of_a_known_curve_become_proportional_to_light() -> None:
    """Code = light^(1/2.2) sampled at 40 points: linearised codes are light times one factor, within 0.5 %.

    That is the error of straight lines between so many points above a tenth of the range.
    """
    light = tuple(float(v) for v in np.linspace(0.02, 0.9, 40))
    table = table_of(_curve(light, tuple(v ** (1 / 2.2) for v in light)))
    assert not isinstance(table, str)
    camera = Camera(8, 6, 12, 0, 4095, tone=Tone("table", table=table))
    there = np.linspace(0.1, 0.85, 50)
    read = linearise(4095 * there ** (1 / 2.2), camera)

    assert table[0] == (0.0, 0.0)
    assert table[-1] == (1.0, 1.0)
    assert np.ptp(read / there) / np.mean(read / there) < 0.005


@pytest.mark.parametrize(
    ("light", "code", "words"),
    [
        ((0.1, 0.2, 0.3), (0.1, 0.2, 0.3), "3 usable points"),
        ((0.1, 0.2, 0.3, 0.4), (0.1, 0.3, 0.2, 0.4), "does not rise"),
    ],
)
def test_what_is_no_curve_is_told(light: tuple[float, ...], code: tuple[float, ...], words: str) -> None:
    """Too few points, or one that falls, give a sentence in place of a table."""
    assert words in str(table_of(_curve(light, code)))
