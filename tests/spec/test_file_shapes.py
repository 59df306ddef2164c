"""The keys of what a spec states about files: each belongs to one kind of file."""

import pytest

from runner.spec.file_shapes import FramesShape, LayoutShape, SidecarShape
from runner.spec.files import FIELDS, PACKINGS
from runner.spec.shape import Shape
from runner.spec.tree import Complaints, parse


def _told(kind: type[Shape], text: str) -> list[str]:
    complaints = Complaints()
    kind.model_validate(parse(f"{{{text}}}", "f", complaints), context=complaints)
    return [c.found for c in complaints.sorted("error")]


@pytest.mark.parametrize("packing", PACKINGS)
def test_every_packing_has_one_meaning(packing: str) -> None:
    """Only 16 bit needs an order of bytes, and only 16 bit may have one."""
    plain, ordered = (
        _told(LayoutShape, f"packing: {packing}"),
        _told(LayoutShape, f"packing: {packing}, byte_order: big"),
    )

    if packing == "16 bit":
        assert (plain, ordered) == (["16 bit without a byte order could mean two things"], [])
    else:
        assert (plain, ordered) == ([], [f"the packing {packing} has its own order of bytes"])


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (LayoutShape, "dataset: entry/frames", []),
        (LayoutShape, "first_row: bottom", []),
        (LayoutShape, "row_padding: 4 bytes", ["row_padding belongs to headerless files"]),
        (LayoutShape, "frames_per_file: 4", ["frames_per_file belongs to headerless files"]),
        (
            LayoutShape,
            "packing: 8 bit, dataset: a",
            ["a dataset stands in HDF5 files, packing in headerless ones"],
        ),
        (LayoutShape, "frames_per_file: 0, packing: 8 bit", ["0 lies outside what is allowed"]),
        (SidecarShape, f"require: [{', '.join(FIELDS)}], counter: consecutive, gain: 2, level: 40 %", []),
        (SidecarShape, "counter: 3", ["'3' is not allowed here"]),
        (SidecarShape, "serial: WS8-1", ["unknown key 'serial' in sidecar"]),
        (FramesShape, "names: 'a-{repeat}.raw', count: 2", []),
    ],
)
def test_keys_belong_together(kind: type[Shape], text: str, told: list[str]) -> None:
    """A key that would mean nothing there is refused, in one sentence."""
    assert _told(kind, text) == told
