"""Refuses what is no even field: a picture of something given as a flat or a dark, and a lit frame given as a dark.

Without that a photograph of a meadow has no hot pixels, and passes.
"""

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.numerics.even_field import MOST_LEFT, structure

MOST_DARK = 0.25
"""Level of a dark over black, share of the range, above which light fell in; dark signal seldom reaches a tenth."""
FILTERED = 2.0
"""Times as much structure is allowed where the spec states that the camera processes its frames."""
ENOUGH = 100_000
"""Pixels that tell a level."""


def refuse_uneven(frames: planes.Stack, *, lit: bool) -> None:
    """Refuse frames that are no even field, by the first one.

    Args:
        frames: The frames.
        lit: A flat; else a dark.

    Raises:
        MeasurementRefused: `too bright`, a dark with light, or `another scene`.
    """
    camera, file = frames.camera, frames.files[0]
    if not lit:
        level = (
            float(np.median(np.asarray(frames.codes[0][:]).ravel()[:: max(1, frames.size // ENOUGH)]))
            - camera.black_level
        )
        share = level / (camera.white_level - camera.black_level)
        if share > MOST_DARK:
            raise MeasurementRefused(
                "too bright",
                f"a frame without light lies {100 * share:.0f} % of the range over the black level",
                where=file,
                allowed=f"at most {100 * MOST_DARK:g} %",
                next_step="shut out the light",
            )
    wide = FILTERED if camera.processing else 1.0
    found = structure(frames.codes[0])
    if found.of_a_picture(wide):
        raise MeasurementRefused(
            "another scene",
            f"the frame is a picture of something: means of small blocks scatter {found.left:.1f} times as much as the "
            "noise of their pixels explains",
            where=file,
            allowed=f"{wide * MOST_LEFT:g} times, in an even field",
        )
