"""Makes the file of a simulated frame, which itself says that it is one, and writes files whole."""

import io
import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import tifffile

from runner.rehearse.sensor import Codes

MARK = "simulated frame"
"""Stands under the key `probatum` in the description of every simulated file."""


def description(serial: str, truth: Mapping[str, Any]) -> str:
    """Return the text of the TIFF tag ImageDescription (270): JSON in ASCII with the mark, the serial and the truth."""
    return json.dumps({"probatum": MARK, "serial": serial, "truth": truth}, sort_keys=True)


def tiff_bytes(codes: Codes, serial: str, truth: Mapping[str, Any]) -> bytes:
    """Return a plain TIFF, 16 bit, without a date: the same frame gives the same bytes.

    Args:
        codes: Rows × columns.
        serial: The unit.
        truth: What is known about the frame; plain data.
    """
    file = io.BytesIO()
    tifffile.imwrite(
        file,
        codes,
        photometric="minisblack",
        description=description(serial, truth),
        software="probatum rehearse",
        metadata=None,
    )
    return file.getvalue()


def write_whole(path: Path, data: bytes) -> None:
    """Write a file beside its place and rename it into place, so that a demo that is cut off leaves no half file."""
    path.parent.mkdir(parents=True, exist_ok=True)
    beside = path.with_name(f".{path.name}")
    beside.write_bytes(data)
    beside.replace(path)
