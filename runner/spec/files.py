"""What a spec states about files of frames: how headerless ones hold their pixels, and what sidecars must say."""

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Packing:
    """How pixels share bytes: `pixels` of them fill `octets` bytes, and every row begins with a new group."""

    bits: int
    """Bits of one pixel."""
    pixels: int
    """Pixels of a group."""
    octets: int
    """Bytes of a group."""


PACKINGS: Mapping[str, Packing] = {
    "8 bit": Packing(8, 1, 1),
    "16 bit": Packing(16, 1, 2),
    "10 bit low bits first": Packing(10, 4, 5),
    "12 bit low bits first": Packing(12, 2, 3),
    "12 bit high bits first": Packing(12, 2, 3),
    "12 bit low nibbles in the middle": Packing(12, 2, 3),
    "MIPI RAW10": Packing(10, 4, 5),
    "MIPI RAW12": Packing(12, 2, 3),
}
"""Packings by the words of the spec (what each means, byte by byte, stands in `capture.formats.packed`)."""
FIELDS = ("serial", "exposure", "gain", "level", "position", "temperature", "counter", "time")
"""What a sidecar may say of a frame."""


@dataclass(frozen=True)
class Layout:
    """How files hold their pixels, as far as they do not say so themselves."""

    packing: str = ""
    """One of `PACKINGS`: files that no format claims are headerless; empty where there are none."""
    byte_order: str = ""
    """`little` or `big`, for 16 bit."""
    row_padding: int = 0
    """Bytes at the end of each row that belong to no pixel."""
    header: int = 0
    """Bytes before the first frame of a file."""
    frames_per_file: int = 1
    """Frames one behind the other in a file."""
    first_row: str = ""
    """`top` or `bottom`: where the first row of a file lies in the picture; empty is as the format says."""
    dataset: str = ""
    """Path of the frames inside an HDF5 file; empty where there is only one dataset."""

    def row_bytes(self, width: int) -> int:
        """Return the bytes of one row, its padding included."""
        packing = PACKINGS[self.packing]
        return width // packing.pixels * packing.octets + self.row_padding

    def file_bytes(self, width: int, height: int) -> int:
        """Return the exact size of a headerless file."""
        return self.header + self.frames_per_file * height * self.row_bytes(width)


@dataclass(frozen=True)
class Agreed:
    """What a field of a sidecar must lie between; equal ends ask for one value."""

    name: str
    """One of `FIELDS`."""
    at_least: float | None
    """Lower end in `unit`."""
    at_most: float | None
    """Upper end in `unit`."""
    unit: str
    """Unit of both."""


@dataclass(frozen=True)
class Sidecar:
    """What the sidecars of a capture's frames must say."""

    require: tuple[str, ...] = ()
    """Fields that must be there, in the order of `FIELDS`."""
    agreed: tuple[Agreed, ...] = ()
    """What fields must be, in the order of `FIELDS`."""
    consecutive: bool = False
    """The counters of the capture's frames must follow one another without a gap."""
