"""What a value beyond its limit says about a unit, in words of the trade; a quantity without a row says nothing."""

from fnmatch import fnmatchcase
from typing import NamedTuple


class Meaning(NamedTuple):
    """What quantities say when they are too low or too high."""

    quantities: tuple[str, ...]
    """Names, or patterns of names with `*`."""
    low: str
    """What follows `the unit` where the value is too low, or nothing."""
    high: str
    """Likewise where it is too high."""


def _off(words: str, *quantities: str) -> Meaning:
    return Meaning(quantities, words, words)


def _low(words: str, *quantities: str) -> Meaning:
    return Meaning(quantities, words, "")


def _high(words: str, *quantities: str) -> Meaning:
    return Meaning(quantities, "", words)


MEANINGS = (
    Meaning(("texture_mtf*", "texture_acutance*"), "loses fine texture", "transfers more than it may"),
    Meaning(
        ("mtf*", "*_mtf*", "modulation_transfer", "contrast_transfer", "peak_transfer"),
        "is soft",
        "transfers more than it may",
    ),
    _high("is soft", "edge_width", "lsf_fwhm"),
    _low("is soft", "resolving_power*", "bar_contrast", "tri_bar_contrast"),
    _high("sharpens its edges too much", "overshoot", "undershoot"),
    _off("smears edges to one side", "lsf_asymmetry"),
    _off("is not focused as asked", "best_focus", "field_curvature", "astigmatism"),
    _off("is tilted", "focus_tilt*", "focal_surface_tilt"),
    _off("is too uneven over the field", "*_balance"),
    _off("shades its picture", "uniformity", "darkest_corner", "luminance_shading"),
    _high("shades its colours", "colour_shading"),
    _high("adds bands", "row_banding", "column_banding"),
    _high(
        "has too many defects",
        *("hot_pixels*", "dead_pixels*", "stuck_pixels*", "dim_pixels*", "bright_pixels*", "blinking_pixels*"),
        *("blemishes*", "clusters*", "largest_cluster*", "defective_columns*", "defective_rows*"),
    ),
    _high(
        "is too noisy",
        *("temporal_noise", "temporal_row_noise", "temporal_column_noise", "temporal_dark_noise*"),
        *("fixed_pattern_noise", "row_noise", "column_noise", "total_noise", "edge_noise"),
    ),
    _low("is too noisy", "snr_*"),
    _high("differs too much from pixel to pixel", "dsnu1288*", "prnu1288*"),
    _high("has too much dark signal", "dark_signal", "dark_current*"),
    _high("is not linear", "linearity_error*", "second_harmonic", "third_harmonic"),
    _high("loses or repeats frames", "lost_frames", "repeated_frames", "reordered_frames", "torn_frames"),
    _off("does not hold its level", "level_drift", "level_unsteadiness", "level_flicker", "settling_*"),
    _off("does not hold its colours", "colour_drift", "colour_settling_frames"),
    _high("scatters light", "veiling_glare*", "image_flare*"),
    _off(
        "distorts",
        *("local_distortion", "largest_distortion", "tv_distortion*", "row_bow", "column_bow"),
        *("radial_k*", "tangential_p*"),
    ),
    _off("splits colours", "*chromatic_displacement", "chromatic_magnification", "chromatic_shift_*"),
    _high("shows colours wrongly", "colour_difference*"),
)
"""The first row that fits a quantity counts."""


def meaning(quantity: str, side: str) -> str:
    """Return what a value beyond its limit says, to follow `the unit`.

    Args:
        quantity: Its name.
        side: `low` or `high`: on which side of the limit it lies.
    """
    for row in MEANINGS:
        if any(fnmatchcase(quantity, pattern) for pattern in row.quantities):
            return (row.low if side == "low" else row.high) or "does not meet the requirement"
    return "does not meet the requirement"
