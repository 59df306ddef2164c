"""A curve through steps follows known tones between them, with exponent and inverse; its noise is that of draws."""

from typing import TYPE_CHECKING

import numpy as np
import pytest

from runner.measure.numerics.tone_curve import tone_curve
from tests.scenes.patches import Values, srgb_code, wedge

if TYPE_CHECKING:
    from collections.abc import Callable

STEPS = np.array(wedge(20, 0.1))[::-1]


@pytest.mark.parametrize("tone", ["power", "srgb", "flare", "shoulder"])
def test_known_tones_between_steps(tone: str) -> None:
    """Twenty steps of density 0.1 give the code anywhere within 0.05 %, the exponent within 0.01.

    IEC 61966-2-1 for sRGB; 1 - exp(-2.2 x) is a shoulder; 0.005 of flare. The bar for the curve is 0.5 %.
    """
    tones: dict[str, Callable[[Values], Values]] = {
        "power": lambda x: np.asarray(x ** (1 / 2.2)),
        "srgb": srgb_code,
        "flare": lambda x: x + 0.005,
        "shoulder": lambda x: np.asarray(1 - np.exp(-2.2 * x)),
    }
    of = tones[tone]
    curve = tone_curve(STEPS, of(STEPS), 1e-9 * STEPS)
    at = np.geomspace(STEPS[0], STEPS[-1], 200)
    step = 1e-6
    exponent = (np.log(of(at * (1 + step))) - np.log(of(at))) / np.log(1 + step)

    np.testing.assert_allclose(curve.codes(at), of(at), rtol=5e-4)
    for light, truth in zip(at[::20], exponent[::20], strict=True):
        assert curve.exponent_at(float(light)).value == pytest.approx(float(truth), abs=0.01)
        code = curve.code_at(float(light))
        assert abs(code.value - float(of(light))) <= 3 * code.shape + 1e-9
        assert curve.signal_at(float(light)).value == pytest.approx(float(of(light) * truth), rel=0.011)


def test_light_of_saturation_and_rise_from_dark() -> None:
    """A straight line through black reaches a code at its light; the darkest steps rise by its slope."""
    curve = tone_curve(STEPS, 4000 * STEPS, np.full(STEPS.size, 1.0))

    assert curve.light_at(4400).value == pytest.approx(1.1, rel=1e-6)
    assert curve.rise_from_dark().value == pytest.approx(4000, rel=1e-6)
    assert curve.rise_from_dark().noise < 4000 / 15


def test_noise_of_the_curve_is_that_of_draws() -> None:
    """Stated noise of code, exponent, saturation and rise agrees with the scatter of 120 noisy curves, within 30 %."""
    rng = np.random.default_rng(6)
    u, light_u = 2.0 + 0.004 * 4000 * STEPS, 0.01
    clean = tone_curve(STEPS, 4000 * STEPS, u, light_u)
    figures = [clean.code_at(0.18), clean.exponent_at(0.18), clean.light_at(4000), clean.rise_from_dark()]
    drawn = []
    for _ in range(120):
        lights = STEPS * (1 + light_u * rng.standard_normal(STEPS.size))
        one = tone_curve(lights, 4000 * STEPS + u * rng.standard_normal(STEPS.size), u)
        drawn.append(
            [one.code_at(0.18).value, one.exponent_at(0.18).value, one.light_at(4000).value, one.rise_from_dark().value]
        )
    for figure, spread in zip(figures, np.std(drawn, axis=0), strict=True):
        assert np.hypot(figure.noise, figure.light) == pytest.approx(float(spread), rel=0.3)


def test_steps_out_of_order_by_noise_are_taken_together() -> None:
    """Two dark steps whose codes are exchanged become one; steps lost in black are left out; one step is no curve."""
    light, code = np.array([0.01, 0.012, 0.1, 0.5, 0.001]), np.array([10.2, 10.0, 100.0, 500.0, 0.1])
    curve = tone_curve(light, code, np.full(5, 0.5))

    np.testing.assert_allclose(curve.light, [0.011, 0.1, 0.5])
    np.testing.assert_allclose(curve.code, [10.1, 100, 500])
    with pytest.raises(ValueError, match="1 steps rise above one another"):
        tone_curve(light[:2], code[:2], np.full(2, 0.5))
