"""Linearises captures by the tone curve that another capture of the same attempt has measured (`uses: {tone: …}`)."""

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

from runner.measure.plan import CapturePlan
from runner.measure.reading import Curve
from runner.spec.model import Tone

CURVE = "oecf"
"""Name of the curve that a tone measurement yields: x is relative light, y the code as a share of the range."""
LEAST_POINTS = 4
"""Fewer points make no curve."""


def source(one: CapturePlan) -> str:
    """Return the capture whose tone curve this one uses, or nothing."""
    return one.capture.uses.get("tone", "")


def in_order(captures: Sequence[CapturePlan]) -> list[CapturePlan]:
    """Return the captures with those that measure a tone curve before those that use it."""
    needed = {source(one) for one in captures}
    return sorted(captures, key=lambda one: one.capture.name not in needed)


def linearised(one: CapturePlan, curves: Sequence[Curve]) -> CapturePlan | str:
    """Return the capture with the tone curve it uses, or the sentence that says why there is none.

    Args:
        one: The capture.
        curves: All curves measured so far in this attempt. Of a camera with colours the green one counts.
    """
    name = source(one)
    found = [c for c in curves if (c.capture, c.name) == (name, CURVE) and c.channel in {"mono", "green"}]
    if not found:
        return f"capture '{name}' gave no tone curve to linearise this one with; see there, and capture it again"
    table = table_of(found[0])
    if isinstance(table, str):
        return f"the tone curve of capture '{name}' {table}; see there, and capture it again"
    camera = replace(one.capture.camera, tone=Tone("table", table=table))
    return replace(one, capture=replace(one.capture, camera=camera))


def table_of(curve: Curve) -> tuple[tuple[float, float], ...] | str:
    """Return a tone curve as pairs (code share, light share) from (0, 0) to (1, 1), or what is wrong with it.

    Beyond the brightest point the curve goes on with the slope of its last two; light is scaled so that the white level
    is 1, which changes no modulation.
    """
    points = sorted((code, light) for light, code in zip(curve.x, curve.y, strict=True) if 0 < code < 1 and light > 0)
    if len(points) < LEAST_POINTS:
        return f"has {len(points)} usable points, at least {LEAST_POINTS} are needed"
    rising = all(a[0] < b[0] and a[1] < b[1] for a, b in pairwise(points))
    if not rising:
        return "does not rise everywhere"
    (before, light_before), (last, light_last) = points[-2:]
    white = light_last + (1 - last) * (light_last - light_before) / (last - before)
    return ((0.0, 0.0), *((code, light / white) for code, light in points), (1.0, 1.0))
