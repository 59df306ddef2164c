"""A chart of stripes whose light follows a sine, in millimetres of the object, and its picture on the sensor.

A sine through any linear system is a sine again, so each patch is drawn from the transfer function alone: its own
modulation times the function at its frequency and direction, pixel aperture included. Nothing is resampled. A patch
ends with a ramp as wide as the blur, which stands for its true border: ground and stripes have the same mean, so there
is no step of light, and inside the ramp the sine is exact.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Transfer
from runner.rehearse.scene import Picture, Square, TransferAt, View, place_on, within


@dataclass(frozen=True)
class Patch:
    """One patch of stripes."""

    x_mm: float
    """Centre from the chart's middle, to the right."""
    y_mm: float
    """Centre from the chart's middle, down."""
    side_mm: float
    """Side of the square patch; its sides stay upright whatever the direction of the stripes."""
    period_mm: float
    """Period of the stripes."""
    direction: float
    """Direction of the stripes' normal from the right, clockwise as seen, degrees."""

    @property
    def square(self) -> Square:
        """The patch's outline."""
        return Square(self.x_mm, self.y_mm, self.side_mm, 0.0)


@dataclass(frozen=True)
class StripeChart:
    """The chart as it was printed."""

    level: float
    """Mean light of patches and ground relative to a white board."""
    modulation: float
    """(bright - dark) / (bright + dark) of the stripes, in (0, 1]."""
    patches: Mapping[str, Patch]
    """Patches by name."""


def frequency_of(patch: Patch, view: View) -> float:
    """Return the stripes' frequency on the sensor, cy/px."""
    return view.mm_per_px / patch.period_mm


def transfer_of(patch: Patch, view: View, transfer_at: TransferAt) -> float:
    """Return the system's transfer function at a patch's place, frequency and direction."""
    system = transfer_at(*view.place(patch.square))
    return float(system.along(frequency_of(patch, view), patch.direction + view.turn))


def picture(chart: StripeChart, view: View, transfer_at: TransferAt) -> Picture:
    """Return the noiseless picture of the chart.

    The system at a patch's centre holds for all of it.

    Args:
        chart: The chart.
        view: How it is seen.
        transfer_at: The system at a place of the sensor.

    Returns:
        Light averaged over each pixel, relative to a white board; rows × columns.
    """
    light = np.full((view.rows, view.columns), chart.level)
    for patch in chart.patches.values():
        _draw(light, patch, view, chart.level * chart.modulation, transfer_at)
    return light


def _draw(light: Picture, patch: Patch, view: View, swing: float, transfer_at: TransferAt) -> None:
    """Add one patch's stripes, in place; a bright stripe runs through the patch's centre."""
    ramp = ramp_of(transfer_at(*view.place(patch.square)))
    half = patch.side_mm / view.mm_per_px / 2
    rows, columns = within(patch.square, view, ramp)
    across, down = place_on(patch.square, view, rows, columns)
    turn = np.deg2rad(patch.direction)  # the chart's own turn is in `across` and `down`
    phase = 2 * np.pi * frequency_of(patch, view) * (across * np.cos(turn) + down * np.sin(turn))
    stripes = swing * transfer_of(patch, view, transfer_at) * np.cos(phase)
    light[rows, columns] += stripes * _window(across, half, ramp) * _window(down, half, ramp)


def ramp_of(system: Transfer) -> float:
    """Return half the width of the ramp that ends a patch, px: pixel, blur disc and twice the Gaussian's spread."""
    return 0.5 + system.disc_radius + 2 * system.blur_um / system.pitch_um


def _window(distance: Picture, half: float, ramp: float) -> Picture:
    return np.asarray(np.clip((half - np.abs(distance)) / (2 * ramp) + 0.5, 0, 1))
