"""Colour channels of a frame: where the pixels of each lie, and one grey picture to find things in.

A mosaic is never demosaiced: a channel is measured on its own pixels at their true places, both green sites together,
and frequencies stay in cycles per pixel of the whole grid.
"""

from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.spec.model import Camera

Mask = NDArray[np.bool_]
_PIECE = 65_536
"""Pixels worked on at a time: in a processor's cache, and no more memory than that."""
_LETTERS = {"red": "R", "green": "G", "blue": "B"}


@lru_cache(maxsize=8)
def sites(channel: str, camera: Camera, origin: tuple[int, int], shape: tuple[int, int]) -> Mask | None:
    """Return where a channel's pixels lie in a part of a frame.

    Args:
        channel: One of the camera's channels.
        camera: Its mosaic.
        origin: First row and column of the part.
        shape: Rows and columns of the part.

    Returns:
        Rows × columns, or None where every pixel belongs to the channel (mono, or one plane of RGB).
    """
    if camera.mosaic == "none":
        return None
    cell = np.array([letter == _LETTERS[channel] for letter in camera.mosaic]).reshape(2, 2)
    rows, columns = (np.arange(first, first + count) % 2 for first, count in zip(origin, shape, strict=True))
    mask = np.asarray(cell[np.ix_(rows, columns)])
    mask.flags.writeable = False  # the same mask serves every frame of that size
    return mask


def plane(codes: NDArray[Any], channel: str, camera: Camera) -> NDArray[Any]:
    """Return the rows × columns that hold a channel: one plane of RGB frames, else the frame itself."""
    return codes[..., camera.channels.index(channel)] if codes.ndim == 3 else codes


def grey(codes: NDArray[Any], camera: Camera) -> NDArray[Any]:
    """Return one picture of all channels, rows × columns, in which a target can be found.

    RGB planes are averaged with the weights 1, 2, 1 of a mosaic cell. A mosaic is smoothed by [1 2 1]/4 along both
    axes, which gives each pixel the same weights wherever it lies in its cell and moves nothing.
    """
    if codes.ndim == 2 and camera.mosaic == "none":
        return codes
    short = codes.dtype.kind in "iu" and codes.dtype.itemsize <= 2  # whose means of 16 float32 holds exactly
    kind: Any = np.float32 if short or codes.ndim == 2 else np.float64
    out: NDArray[Any] = np.empty(codes.shape[:2], dtype=kind)
    height = max(1, _PIECE // codes.shape[1])
    for y in range(0, codes.shape[0], height):
        strip = slice(y, min(y + height, codes.shape[0]))
        if codes.ndim == 3:
            red, green, blue = (codes[strip, :, n].astype(kind) for n in range(3))
            out[strip] = (red + 2 * green + blue) / 4
        else:
            _smooth(codes, strip, out[strip])
    return out


def _smooth(codes: NDArray[Any], rows: slice, out: NDArray[Any]) -> None:
    """Smooth some rows of a mosaic; beyond the border it is reflected, which keeps the cell's order."""
    last = codes.shape[0] - 1
    around = np.clip(last - np.abs(last - np.abs(np.arange(rows.start - 1, rows.stop + 1))), 0, last)
    padded = np.pad(codes[around].astype(np.float32), ((0, 0), (1, 1)), mode="reflect")
    along = (padded[:, :-2] + 2 * padded[:, 1:-1] + padded[:, 2:]) / 4
    out[:] = (along[:-2] + 2 * along[1:-1] + along[2:]) / 4
