"""A painted star against the closed form of a blurred star."""

import numpy as np

from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen, picture
from runner.rehearse.stars import Star
from tests.scenes.stars import StarScene


def test_a_star_is_seen_as_webers_integral_says() -> None:
    """Watson, Theory of Bessel Functions, 13.3: the star's amplitude under a Gaussian, to 0.3 % of its light."""
    scene = StarScene(
        size=(160, 140), centre=(80.0, 70.0), cycles=36, outer=65.0, sigma=0.6, level=0.5, modulation=0.7, phase=0.0
    )
    star = Star(cycles=36, diameter_mm=65.0, modulation=0.7, level=0.5)
    seen = Seen(160, 140, 0.5, Transfer(0.2, 0.05, 0.0, 0.6, 1.0))

    found, truth = picture(star.paint, seen, cells=5), scene.light()

    x, y = np.meshgrid(np.arange(160) + 0.5 - 80, np.arange(140) + 0.5 - 70)
    inside = np.hypot(x, y) < 62  # the rim's own blur is no part of the closed form
    assert np.abs(found - truth)[inside].max() < 0.003
    assert truth[inside].std() > 0.1


def test_around_the_star_lies_its_mean() -> None:
    """Outside the diameter there are no stripes; a quarter of a cycle on, bright stripes are dark ones."""
    star = Star(cycles=8, diameter_mm=20.0, modulation=0.8, level=0.4)
    at = np.array([5.0, 5.0 * np.cos(np.pi / 8), 12.0])
    down = np.array([0.0, 5.0 * np.sin(np.pi / 8), 0.0])

    assert np.allclose(star.paint(at, down, 1e-3), [0.72, 0.08, 0.4], atol=1e-3)
