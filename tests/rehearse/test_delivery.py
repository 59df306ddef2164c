"""What a station leaves: packed bytes, sidecars, a manifest that knows what should be there, and its mishaps."""

import json
from hashlib import sha256
from pathlib import Path

import numpy as np
import pytest

from runner.rehearse.delivery import HIGH_FIRST, LOW_FIRST, Delivery, Mishap, Shot, deliver, half, pack

PAIR = np.array([[0xABC, 0xDEF]], dtype=np.uint16)
RNG = np.random.default_rng(0)
SHOTS = [Shot(capture, n, RNG.integers(100, 4000, (20, 40), dtype=np.uint16)) for capture in "ab" for n in (1, 2)]
STATION = Delivery(("a",), LOW_FIRST, {"exposure": "4 ms"})


def _unit(tmp_path: Path, mishap: Mishap = "none", delivery: Delivery = STATION) -> Path:
    deliver(tmp_path, "X-1", SHOTS, delivery, mishap, {"story": "good"})
    return tmp_path


def test_two_pixels_share_three_bytes() -> None:
    """ABC and DEF are BC FA DE least significant bit first, AB CD EF most significant bit first.

    Sources: TIFF 6.0 for the latter; the former is common practice, no source.
    """
    assert pack(PAIR, LOW_FIRST).hex() == "bcfade"
    assert pack(PAIR, HIGH_FIRST).hex() == "abcdef"


def test_each_frame_has_a_sidecar_and_the_manifest_lists_all(tmp_path: Path) -> None:
    """Counters go on over captures; the manifest has size and digest of every file but itself; raws are packed."""
    place = _unit(tmp_path)
    manifest = json.loads((place / "manifest.json").read_text(encoding="utf-8"))
    listed = {one["name"]: (one["size"], one["sha256"]) for one in manifest["files"]}
    there = {p.name: p.read_bytes() for p in place.iterdir() if p.name != "manifest.json"}

    assert set(there) == {f"{stem}.{end}" for stem in ("a-1", "a-2") for end in ("raw", "json")} | {
        f"{stem}.{end}" for stem in ("b-1", "b-2") for end in ("tif", "json")
    }
    assert manifest["count"] == 8
    assert listed == {name: (len(data), sha256(data).hexdigest()) for name, data in there.items()}
    assert there["a-1.raw"] == pack(SHOTS[0].codes, LOW_FIRST)
    said = [json.loads(there[f"{stem}.json"]) for stem in ("a-1", "a-2", "b-1", "b-2")]
    assert [one["counter"] for one in said] == [1, 2, 3, 4]
    assert said[0] == {"probatum": "simulated frame", "serial": "X-1", "counter": 1, "exposure": "4 ms"}


def test_other_packing_is_the_whole_stations_own(tmp_path: Path) -> None:
    """The mixed-up station packs every raw the other way and knows nothing of it: its manifest agrees."""
    place = _unit(tmp_path, "other packing")
    manifest = json.loads((place / "manifest.json").read_text(encoding="utf-8"))

    assert (place / "a-1.raw").read_bytes() == pack(SHOTS[0].codes, HIGH_FIRST)
    for one in manifest["files"]:
        assert sha256((place / one["name"]).read_bytes()).hexdigest() == one["sha256"]


def test_half_copied_file_has_its_size_and_no_end(tmp_path: Path) -> None:
    """The last raw keeps its size, its second half is zeros, and the manifest lists the whole one; others are whole."""
    place = _unit(tmp_path, "half copied")
    whole = pack(SHOTS[1].codes, LOW_FIRST)
    listed = {one["name"]: one["sha256"] for one in json.loads((place / "manifest.json").read_bytes())["files"]}
    wrong = [n for n, digest in listed.items() if sha256((place / n).read_bytes()).hexdigest() != digest]

    assert wrong == ["a-2.raw"]
    assert (place / "a-2.raw").read_bytes() == whole[: len(whole) // 2] + bytes(len(whole) - len(whole) // 2)
    assert listed["a-2.raw"] == sha256(whole).hexdigest()
    assert half(b"abcde") == b"ab\0\0\0"


@pytest.mark.parametrize("delivery", [Delivery(), Delivery(("a",))])
def test_plain_station_leaves_frames_alone(delivery: Delivery, tmp_path: Path) -> None:
    """Without settings there are neither sidecars nor a manifest."""
    ends = {p.suffix for p in _unit(tmp_path, delivery=delivery).iterdir()}

    assert ends == ({".tif"} if not delivery.raw else {".raw", ".tif"})
