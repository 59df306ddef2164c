"""Figures of colours and their uncertainty: what noise adds is taken off, causes are told apart, fits are followed."""

import numpy as np
import pytest

from runner.measure.colour_figures import Colours, figures, measured_lab, ratios
from runner.measure.numerics.colour_conversion import Way
from runner.measure.numerics.colour_difference import ciede2000
from runner.measure.numerics.colour_spaces import SRGB, SRGB_WHITE
from tests.scenes.colours import LAB, linear_srgb

RGB = linear_srgb(LAB)
WAY = Way(SRGB, SRGB_WHITE, SRGB_WHITE)
U = np.full(RGB.shape, 0.002)


def test_patches_as_the_camera_shows_them() -> None:
    """A true camera shows the references; each patch's figure is its CIEDE2000 where noise is small against it."""
    np.testing.assert_allclose(measured_lab(Colours(RGB, U, LAB), WAY), LAB, atol=0.03)
    off = RGB * np.array([1.2, 1.0, 0.9])
    colours = Colours(off, np.full(RGB.shape, 1e-5), LAB)
    each = ciede2000(measured_lab(colours, WAY), LAB)
    found = figures(colours, WAY)

    for n in range(24):
        assert found[f"patch {n + 1}"].value == pytest.approx(float(each[n]), abs=0.01)
    assert found["mean"].value == pytest.approx(float(each.mean()), abs=0.01)
    assert found["worst"].value == pytest.approx(float(each.max()), abs=0.01)


def test_noise_alone_makes_no_difference() -> None:
    """Over 8 noisy draws of a true camera the mean difference told is less than a third of what it reads plainly."""
    rng = np.random.default_rng(5)
    read, told = [], []
    for _ in range(8):
        colours = Colours(RGB + U * rng.standard_normal(RGB.shape), U, LAB)
        read.append(ciede2000(measured_lab(colours, WAY), LAB).mean())
        told.append(figures(colours, WAY)["mean"].value)

    assert np.mean(read) > 0.2
    assert np.mean(told) < 0.3 * np.mean(read)


def test_causes_are_told_apart() -> None:
    """What is not stated has no part; uneven light moves lightness but no ratio of channels; references move all."""
    light = Colours(RGB, 0 * U, LAB, light_u=0.02)
    lab = Colours(RGB, 0 * U, LAB, lab_u=0.5)
    by_light, by_lab = ratios(light, WAY), ratios(lab, WAY)

    assert by_light["red"].parts["noise"] < 1e-12
    assert by_light["red"].parts["references"] < 1e-12
    assert by_light["red"].parts["uneven light"] < 0.002
    assert by_lab["red"].parts["references"] > 0.001
    assert figures(light, WAY)["patch 1"].parts["uneven light"] > 0
    assert ratios(Colours(RGB, U, LAB), WAY)["chroma"].parts["noise"] > 0


def test_what_a_chart_does_not_hold_is_not_told() -> None:
    """Without neutral patches there is no balance and no axis, without coloured ones no hue and no chroma."""
    colours, greys = Colours(RGB[:18], U[:18], LAB[:18]), Colours(RGB[18:], U[18:], LAB[18:])

    assert set(ratios(colours, WAY)) == {"chroma"}
    assert "neutral" not in figures(colours, WAY)
    assert set(ratios(greys, WAY)) == {"red", "blue"}
    assert "hue" not in figures(greys, WAY)
