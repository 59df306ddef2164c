"""Options that a chart's features fill: what a chart file says of a feature need not be said again in the spec."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from typing import Any

from runner.errors import UsageError
from runner.spec.chart_model import Feature
from runner.spec.model import Capture, Region


@dataclass(frozen=True)
class Filled:
    """Options of a target or method on one capture."""

    options: Any
    """For all regions that have none of their own."""
    own: Mapping[str, Any]
    """By region, where features differ."""


def feature_of(region: Region, capture: Capture) -> Feature | None:
    """Return the chart's feature that a region names, or that its place on the chart lies in."""
    file = capture.chart.file
    if file is None or region.on != "chart":
        return None
    x, y = (part.value for part in region.position)
    return file.features[region.feature] if region.feature else file.within((x, y))


def filled(read: Callable[[Mapping[str, Any]], Any], record: Any, asked: Mapping[str, Any], capture: Capture) -> Filled:
    """Read the options of a target or method: the spec's keys, then those of the same name in the chart's features.

    Args:
        read: The module's `read_options`.
        record: The module's `Options`.
        asked: The spec's keys.
        capture: With its chart and regions.

    Raises:
        UsageError: A key or value is not allowed; of a feature, it is named.
    """
    known = {f.name for f in fields(record)}
    own: dict[str, Any] = {}
    for region in capture.regions:
        feature = feature_of(region, capture)
        values = {k: v for k, v in feature.values.items() if k in known and k not in asked} if feature else {}
        if feature is None or not values:
            continue
        try:
            own[region.name] = read({**values, **asked})
        except UsageError as error:
            found = f"feature '{feature.name}' of the chart: {error.found}"
            raise UsageError(found, allowed=error.allowed, next_step=error.next_step) from error
    first = next(iter(own.values()), None)
    if first is None:
        return Filled(read(asked), {})
    if len(own) == len(capture.regions):
        return Filled(first, {} if all(one == first for one in own.values()) else own)
    return Filled(read(asked), own)
