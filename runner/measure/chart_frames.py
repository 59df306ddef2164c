"""A capture's chart in all of its frames: the pose in each, or why the capture is unfit."""

from collections.abc import Sequence

from runner.capture.frame import Frame
from runner.capture.mosaic import grey
from runner.measure.chart_view import Unfit, look
from runner.measure.numerics.chart_pose import ChartPose
from runner.spec.model import Capture


def poses(
    frames: Sequence[Frame], capture: Capture, *, fixed: bool
) -> tuple[tuple[ChartPose | None, ...], tuple[str, ...]]:
    """Return the chart's pose in each frame, and sentences about frames that are no pictures of it as it must be.

    Args:
        frames: Of the capture.
        capture: With its chart; one without a chart file has no poses.
        fixed: The frames differ in focus, exposure or the like while the chart stays where it is: where it cannot be
            seen in one, it lies as in the nearest that shows it.
    """
    if capture.chart.file is None:
        return (None,) * len(frames), ()
    seen = [look(grey(frame.codes, capture.camera), capture.camera, capture.optics, capture.chart) for frame in frames]
    good = [n for n, one in enumerate(seen) if isinstance(one, ChartPose)]
    found: list[ChartPose | None] = []
    faults: list[str] = []
    for n, one in enumerate(seen):
        if fixed and good and isinstance(one, Unfit) and not one.shown:
            one = seen[min(good, key=lambda m: abs(m - n))]  # noqa: PLW2901 - as the nearest frame has it
        found.append(one if isinstance(one, ChartPose) else None)
        if isinstance(one, Unfit):
            faults.append(f"{one.because} ({frames[n].file})" if len(frames) > 1 else one.because)
    return tuple(found), tuple(faults)
