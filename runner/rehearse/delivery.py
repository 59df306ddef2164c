"""What a station leaves of a unit: files of frames, their sidecars and a manifest, and what goes wrong with them.

Headerless files cannot carry the mark of a simulated frame; their sidecars say it, and so do the TIFFs beside them.

References:
    12-bit packings: TIFF Revision 6.0 (Adobe, 1992) for the most significant bit first; least significant bit first is
    common practice of cameras, no source.
"""

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from hashlib import sha256
from pathlib import Path
from typing import Any, Literal

import numpy as np

from runner.rehearse.frames import MARK, tiff_bytes, write_whole
from runner.rehearse.sensor import Codes

LOW_FIRST, HIGH_FIRST = "12 bit low bits first", "12 bit high bits first"
Mishap = Literal["none", "other packing", "half copied"]
"""`other packing`: the station packs bits in the other order. `half copied`: one file has its size, but not its end."""
MANIFEST = "manifest.json"


@dataclass(frozen=True)
class Delivery:
    """How a lot's station writes files."""

    raw: tuple[str, ...] = ()
    """Captures written as headerless packed raw; all others are TIFF."""
    packing: str = LOW_FIRST
    """How two pixels share three bytes."""
    settings: Mapping[str, str] | None = None
    """What every sidecar says, e.g. the exposure; without it there are neither sidecars nor a manifest."""


@dataclass(frozen=True)
class Shot:
    """One frame as the camera gave it."""

    capture: str
    """Its capture."""
    repeat: int
    """From 1."""
    codes: Codes
    """Rows × columns."""
    step: str = ""
    """Where along the capture's axis it was taken, as names say; empty without one."""
    said: Mapping[str, Any] = field(default_factory=dict)
    """What its sidecar says besides, or otherwise."""


def file_name(delivery: Delivery, capture: str, repeat: int, step: str = "") -> str:
    """Return the name of a frame's file."""
    return f"{'-'.join(filter(None, (capture, step, str(repeat))))}.{'raw' if capture in delivery.raw else 'tif'}"


def pack(codes: Codes, packing: str) -> bytes:
    """Pack 12-bit codes, two pixels a and b in three bytes.

    Args:
        codes: Rows × columns, an even number of columns.
        packing: `12 bit low bits first` (a[7:0], b[3:0]|a[11:8], b[11:4]) or `12 bit high bits first` (a[11:4],
            a[3:0]|b[11:8], b[7:0]).
    """
    a, b = codes[:, ::2], codes[:, 1::2]
    if packing == LOW_FIRST:
        octets = a & 255, a >> 8 | (b & 15) << 4, b >> 4
    else:
        octets = a >> 4, (a & 15) << 4 | b >> 8, b & 255
    return np.stack(octets, axis=-1).astype(np.uint8).tobytes()


def deliver(
    folder: Path, serial: str, shots: Sequence[Shot], delivery: Delivery, mishap: Mishap, truth: Mapping[str, Any]
) -> None:
    """Write one unit's files as its station does, the manifest last.

    Args:
        folder: The unit's folder.
        serial: The unit.
        shots: Its frames in the order in which they were taken.
        delivery: What the station writes.
        mishap: What goes wrong.
        truth: What is known about the unit; plain data.
    """
    if mishap == "other packing":
        delivery = replace(delivery, packing=HIGH_FIRST if delivery.packing == LOW_FIRST else LOW_FIRST)
    listed: list[dict[str, Any]] = []
    write = _writer(folder, listed)
    for number, shot in enumerate(shots, 1):
        name = file_name(delivery, shot.capture, shot.repeat, shot.step)
        whole = pack(shot.codes, delivery.packing) if name.endswith(".raw") else tiff_bytes(shot.codes, serial, truth)
        cut = mishap == "half copied" and shot is _last_raw(shots, delivery)
        write(name, whole, half(whole) if cut else whole)
        if delivery.settings is not None:
            said = {"probatum": MARK, "serial": serial, "counter": number, **delivery.settings, **shot.said}
            text = (json.dumps(said, sort_keys=True) + "\n").encode()
            write(f"{Path(name).stem}.json", text, text)
    if delivery.settings is not None:
        content = {"count": len(listed), "files": listed}
        write_whole(folder / MANIFEST, (json.dumps(content, indent=1, sort_keys=True) + "\n").encode())


def half(whole: bytes) -> bytes:
    """Return a file as a copy still under way shows it: all of its size, and nothing but zeros in its second half."""
    there = len(whole) // 2
    return whole[:there] + bytes(len(whole) - there)


def _last_raw(shots: Sequence[Shot], delivery: Delivery) -> Shot | None:
    return next((shot for shot in reversed(shots) if shot.capture in delivery.raw), None)


def _writer(folder: Path, listed: list[dict[str, Any]]) -> Callable[[str, bytes, bytes], None]:
    """Return what writes a file and notes it as the station knows it, whatever of it has arrived."""

    def write(name: str, whole: bytes, arrived: bytes) -> None:
        listed.append({"name": name, "size": len(whole), "sha256": sha256(whole).hexdigest()})
        write_whole(folder / name, arrived)

    return write
