"""What failing values say about a unit: words of the trade on the right side, and none that no quantity ever speaks."""

from fnmatch import fnmatchcase
from importlib import import_module
from pkgutil import iter_modules

import pytest

import runner.measure.methods as shelf
from runner.judge.meanings import MEANINGS, meaning

PLANNED = {"texture_mtf*", "texture_acutance*", "colour_difference*", "contrast_transfer"}
PLANNED |= {"resolving_power*", "bar_contrast", "tri_bar_contrast"}
"""Quantities of methods that need not be on the shelf."""


@pytest.mark.parametrize(
    ("quantity", "low", "high"),
    [
        ("modulation_transfer", "is soft", "transfers more than it may"),
        ("mtf50", "is soft", "transfers more than it may"),
        ("tangential_mtf50", "is soft", "transfers more than it may"),
        ("texture_mtf50", "loses fine texture", "transfers more than it may"),
        ("uniformity", "shades its picture", "shades its picture"),
        ("luminance_shading", "shades its picture", "shades its picture"),
        ("row_banding", "does not meet the requirement", "adds bands"),
        ("row_banding_frequency", "does not meet the requirement", "does not meet the requirement"),
        ("defective_columns", "does not meet the requirement", "has too many defects"),
        ("hot_pixels_centre", "does not meet the requirement", "has too many defects"),
        ("snr_temporal", "is too noisy", "does not meet the requirement"),
        ("temporal_noise", "does not meet the requirement", "is too noisy"),
        ("best_focus", "is not focused as asked", "is not focused as asked"),
        ("focal_surface_tilt", "is tilted", "is tilted"),
        ("torn_frames", "does not meet the requirement", "loses or repeats frames"),
        ("level_flicker", "does not hold its level", "does not hold its level"),
        ("veiling_glare_index_iso9358", "does not meet the requirement", "scatters light"),
        ("tv_distortion_ebu", "distorts", "distorts"),
        ("corner_chromatic_displacement", "splits colours", "splits colours"),
        ("a_plug_ins_own", "does not meet the requirement", "does not meet the requirement"),
    ],
)
def test_both_sides_of_a_limit(quantity: str, low: str, high: str) -> None:
    """Too little and too much say different things, and a quantity without a row says nothing (common practice)."""
    assert (meaning(quantity, "low"), meaning(quantity, "high")) == (low, high)


def test_every_row_can_be_spoken() -> None:
    """A pattern that fits no quantity of any method, or only what an earlier row takes, is a mistake."""
    methods = [import_module(f"{shelf.__name__}.{one.name}") for one in iter_modules(shelf.__path__)]
    known = {name for method in methods if hasattr(method, "quantities") for name in method.quantities()}
    taken: set[str] = set()
    for row in MEANINGS:
        for pattern in row.quantities:
            mine = {name for name in known - taken if fnmatchcase(name, pattern)}
            assert mine or pattern in PLANNED, pattern
            taken |= mine
