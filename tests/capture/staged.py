"""What staged bad captures of the other kinds of files share: a camera that looks at a shaded field, and two units."""

import json
from collections.abc import Callable
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.spec.files import Layout
from runner.spec.model import Camera
from tests.capture.raw_scenes import HEIGHT, WIDTH, Codes, scenes, take

UNIT, NEIGHBOUR = "WS8-000101", "WS8-000102"
CAMERA = Camera(WIDTH, HEIGHT, 12, 64, 4095)
SHADED = next(light for name, light in scenes() if name == "shaded flat")
TUNGSTEN = "tungsten"


def spec_text(camera: str = "", capture: str = "") -> str:
    """Return a spec of one evenly lit field, with more lines for its camera and its capture."""
    return f"""\
probatum-spec: 1
document: {{number: WS8-FIL, revision: A}}
unit: {{product: WS8, serial: 'WS8-[0-9]{{6}}'}}
camera:
  frame_size: {WIDTH} x {HEIGHT} px
  bit_depth: 12 bit
  black_level: 64 DN
  white_level: 4095 DN
{camera}captures:
  flat:
    target: flat field
    frames: {{names: 'flat-{{repeat}}.*', count: 2}}
{capture}    regions: {{middle: {{position: [50 %, 50 %], size: [32 px, 32 px]}}}}
    limits: [{{characteristic: 1, quantity: level, where: middle, at_least: 10 %}}]
"""


@dataclass(frozen=True)
class Kind:
    """A kind of files that stations write."""

    spec: str
    """Text of the spec."""
    write: Callable[[Path, str, int], None]
    """Writes the good files of a unit: its folder, its serial, a seed."""


@dataclass(frozen=True)
class Staged:
    """One staged error."""

    name: str
    """What was done."""
    says: str
    """Part of the sentence that must come, a regular expression."""
    kind: Kind
    """Kind of files."""
    spoil: Callable[[Path], None]
    """Spoils the folder of the first unit."""
    at_fault: str = "capture"
    """Who must be blamed."""
    exit: int = 4
    """Exit code of a run: not measured."""
    capture: str = "flat"
    """Capture of the first unit that must not be measured."""


def codes(seed: int, camera: Camera = CAMERA, light: NDArray[np.float64] = SHADED) -> Codes:
    """Return one frame."""
    return take(light, camera, seed, TUNGSTEN)


def good_lot(root: Path, kind: Kind) -> None:
    """Write two good units."""
    for number, serial in enumerate((UNIT, NEIGHBOUR)):
        (root / serial).mkdir(parents=True)
        kind.write(root / serial, serial, 100 * (number + 1))


def frames_of(make: Callable[[Codes], bytes], ending: str, camera: Camera = CAMERA) -> Callable[[Path, str, int], None]:
    """Return what writes the two frames of a unit in one format."""

    def write(folder: Path, serial: str, seed: int) -> None:
        for repeat in (1, 2):
            (folder / f"flat-{repeat}.{ending}").write_bytes(make(codes(seed + repeat, camera)))

    return write


def second(make: Callable[[Codes], bytes], ending: str, camera: Camera = CAMERA) -> Callable[[Path], None]:
    """Return what replaces the second frame by another file."""

    def spoil(folder: Path) -> None:
        for file in folder.glob("flat-2.*"):
            file.unlink()
        (folder / f"flat-2.{ending}").write_bytes(make(codes(77, camera)))

    return spoil


def changed(file: str, make: Callable[[Path], bytes]) -> Callable[[Path], None]:
    """Return what writes one file of a folder anew, whatever it held."""

    def spoil(folder: Path) -> None:
        (folder / file).write_bytes(make(folder))

    return spoil


def sha(data: bytes) -> str:
    """Return the digest of bytes as hexadecimal digits."""
    return sha256(data).hexdigest()


def manifest(folder: Path, **changes: Any) -> None:
    """Write a manifest.json of every file in a folder; `changes` replace parts of it."""
    files = [f for f in sorted(folder.iterdir()) if not f.name.startswith("manifest")]
    entries = [{"name": f.name, "size": f.stat().st_size, "sha256": sha(f.read_bytes())} for f in files]
    content = {"count": len(entries), "files": entries} | changes
    (folder / "manifest.json").write_text(json.dumps(content))


LITTLE = Layout("16 bit", "little")
