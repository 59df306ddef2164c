"""Calls the methods that take all regions of a capture together, after the others have measured."""

from collections.abc import Callable, Mapping, Sequence
from functools import partial
from typing import Any, Protocol, cast

from runner.measure.answers import attempted
from runner.measure.contract import Measurement, NotFound, Sample, Scene, Step
from runner.measure.plan import CapturePlan, MethodPlan
from runner.measure.reading import Reading
from runner.measure.steps import Group
from runner.spec.model import Amount

Sampler = Callable[[int, str], tuple[Sample, ...]]
"""Gives every region found in a step's first frame, by the step's number and the channel."""


class Gatherer(Protocol):
    """What a method with `GATHERS = True` offers besides the rest."""

    def gather(self, scene: Scene, options: Any) -> Measurement:
        """Measure a capture, or a group of its regions, as a whole.

        Raises:
            MeasurementRefused: It cannot be measured.
        """
        ...


def gather(
    one: CapturePlan,
    plan: MethodPlan,
    channel: str,
    groups: Sequence[Group],
    taken: Sequence[Mapping[str, Amount]],
    readings: Sequence[Sequence[Reading]],
    sampler: Sampler,
    lost: Sequence[NotFound],
    tracebacks: list[str],
) -> tuple[Measurement, ...]:
    """Return what a method makes of all regions, then of each group that a limit names.

    Args:
        one: The capture.
        plan: The method.
        channel: Colour channel.
        groups: Steps of the capture.
        taken: What the sidecars of each step's first frame say.
        readings: What the other methods read, by step.
        sampler: Gives the regions of a step.
        lost: Regions that were not found.
        tracebacks: Takes the text of a fault of the program.
    """
    method = cast("Gatherer", plan.method)
    everyone = tuple(region.name for region in one.capture.regions) or ("",)
    made = []
    for name, regions in {"": everyone, **plan.groups}.items():
        wanted = plan.wanted.get(name, ())
        steps = tuple(
            Step(
                group.axes,
                taken[number],
                tuple(sample for sample in sampler(number, channel) if sample.found.region in regions),
                tuple(r for r in readings[number] if r.channel == channel and r.region in regions),
            )
            for number, group in enumerate(groups)
        )
        camera = one.capture.camera
        scene = Scene(
            name,
            regions,
            steps,
            tuple(missing for missing in lost if missing.region in regions),
            (camera.width, camera.height),
            camera,
            one.capture.optics,
            one.capture.chart,
            wanted,
        )

        place = f"{one.capture.name}, {name or 'all regions'}"
        made.append(attempted(partial(method.gather, scene, plan.options), plan, name, wanted, place, tracebacks))
    return tuple(made)
