"""The shapes of what a spec states about files of frames: pattern, layout, sidecars."""

from collections.abc import Iterator
from typing import Annotated, ClassVar

from runner.spec import device_leaves, file_leaves, leaves
from runner.spec.files import PACKINGS
from runner.spec.leaves import choice
from runner.spec.shape import Found, Shape


class FramesShape(Shape):
    """Which files are frames of a capture."""

    WORDS: ClassVar[str] = "frames"
    SHORT: ClassVar[str | None] = "names"
    REQUIRED: ClassVar[tuple[str, ...]] = ("names",)
    names: device_leaves.Names
    """Pattern inside the unit's folder: * and named parts, e.g. 'chart-{repeat}.tif'."""
    count: leaves.Count | None = None
    """How many there must be; makes a lost frame visible."""


class LayoutShape(Shape):
    """How files hold their pixels, as far as they do not say so themselves."""

    WORDS: ClassVar[str] = "layout"
    packing: Annotated[str, *choice(*PACKINGS)] | None = None
    """Headerless files: how pixels fill bytes."""
    byte_order: Annotated[str, *choice("little", "big")] | None = None
    """Headerless files of 16 bit: which byte comes first."""
    row_padding: file_leaves.Bytes | None = None
    """Headerless files: bytes at the end of each row that belong to no pixel, e.g. 32 bytes."""
    header: file_leaves.Bytes | None = None
    """Headerless files: bytes before the first frame, e.g. 512 bytes."""
    frames_per_file: leaves.Count | None = None
    """Headerless files: frames one behind the other in each; without it, one."""
    first_row: Annotated[str, *choice("top", "bottom")] | None = None
    """Headerless, FITS and HDF5 files: where the first row lies in the picture."""
    dataset: file_leaves.DatasetPath | None = None
    """HDF5 files: path of the frames, e.g. entry/frames."""

    def check(self) -> Iterator[Found]:
        """Each key belongs to one kind of file; an order of bytes is stated wherever there is one."""
        if self.packing is None:
            for key in ("byte_order", "row_padding", "header", "frames_per_file"):
                if self.stated(key):
                    yield key, f"{key} belongs to headerless files", "", "state packing too, or leave it out"
            return
        if self.dataset is not None:
            yield "dataset", "a dataset stands in HDF5 files, packing in headerless ones", "", "keep one of them"
        if self.packing == "16 bit" and self.byte_order is None:
            yield "packing", "16 bit without a byte order could mean two things", "", "add byte_order: little, or big"
        if self.packing != "16 bit" and self.byte_order is not None:
            found = f"the packing {self.packing} has its own order of bytes"
            yield "byte_order", found, "only 16 bit has a byte_order", "leave it out"


class SidecarShape(Shape):
    """What the sidecars of a capture's frames must say."""

    WORDS: ClassVar[str] = "sidecar"
    require: file_leaves.Fields | None = None
    """Fields that must be there, e.g. [serial, exposure]."""
    exposure: file_leaves.Exposure | None = None
    """Exposure time, one value or an inequality, e.g. 2 ms."""
    gain: file_leaves.Gain | None = None
    """Gain, e.g. 6 dB, or 4 as a plain factor."""
    level: file_leaves.AnyValue | None = None
    """Level of the light as the station sets it, e.g. 50 %."""
    position: file_leaves.Position | None = None
    """Position along the optical axis, of focus or stage, e.g. from 1 mm to 2 mm."""
    temperature: file_leaves.Temperature | None = None
    """Temperature, e.g. from 20 degC to 30 degC."""
    counter: Annotated[str, *choice("consecutive")] | None = None
    """consecutive: the frames' counters must follow one another without a gap."""
