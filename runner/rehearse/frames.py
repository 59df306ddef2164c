"""Writes a simulated frame; the file itself says that it is one."""

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


def write_frame(path: Path, codes: Codes, serial: str, truth: Mapping[str, Any]) -> None:
    """Write one frame beside its place and rename it into place, so that a cut-off demo leaves no half frame."""
    path.parent.mkdir(parents=True, exist_ok=True)
    beside = path.with_name(f".{path.name}")
    beside.write_bytes(tiff_bytes(codes, serial, truth))
    beside.replace(path)
