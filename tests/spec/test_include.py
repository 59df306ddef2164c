"""Variants that share a base: merged by keys, limits by characteristic, places of their own files."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import read_spec
from tests.scenes.spec_text import TEXT, write

VARIANT = """\
probatum-spec: 1
include: base.yaml
document: {number: WS9-ACC, revision: A}
camera: {pixel_pitch: 2.0 um}
captures:
  chart:
    frames: 'edge-{repeat}.tif'
    limits:
      - {characteristic: 2, quantity: mtf50, where: corners, at_least: 0.15 cy/px}
      - {characteristic: 3, remove: true}
      - {characteristic: 9, quantity: edge_width, where: centre, at_most: 4 px}
"""


def _read(folder: Path, variant: str, base: str = TEXT) -> list[str]:
    write(folder, base, "base.yaml")
    with pytest.raises(SpecError, match="yaml") as caught:
        read_spec(write(folder, variant, "variant.yaml"))
    return [f"{Path(c.where).name} {c.found}" for c in caught.value.complaints]


def test_a_variant_overrides_its_base(tmp_path: Path) -> None:
    """Mappings are merged, other values replaced, limits replaced by characteristic, removed or added at the end."""
    write(tmp_path, TEXT, "base.yaml")
    spec = read_spec(write(tmp_path, VARIANT, "variant.yaml"))

    chart = spec.capture("chart")
    assert (spec.document.number, spec.document.revision) == ("WS9-ACC", "A")
    assert (spec.camera.width, spec.camera.pixel_pitch_um) == (1600, 2.0)
    assert chart.frames is not None
    assert (chart.frames.names, chart.frames.count) == ("edge-{repeat}.tif", None)
    assert [(limit.characteristic, limit.at_least, limit.at_most) for limit in chart.limits] == [
        ("1", 0.45, None),
        ("2", 0.15, None),
        ("9", None, 4.0),
    ]


def test_the_digest_is_of_the_expanded_form(tmp_path: Path) -> None:
    """A variant that changes nothing has the digest of its base: how a spec is put together does not count."""
    base = read_spec(write(tmp_path, TEXT, "base.yaml"))
    variant = read_spec(write(tmp_path, "probatum-spec: 1\ninclude: base.yaml\n", "variant.yaml"))

    assert variant.digest == base.digest
    assert "include" not in variant.expanded


def test_a_capture_can_be_removed(tmp_path: Path) -> None:
    """`remove: true` takes a capture away; what still names it is told."""
    variant = "probatum-spec: 1\ninclude: base.yaml\ncaptures:\n  dark: {remove: true}\n"

    assert _read(tmp_path, variant) == ["base.yaml:19:18 there is no capture 'dark'"]


def test_complaints_name_the_file_they_come_from(tmp_path: Path) -> None:
    """An error of the base is told in the base, an error of the variant in the variant, both at once."""
    told = _read(tmp_path, VARIANT.replace("2.0 um", "2.0"), TEXT.replace("64 DN", "64"))

    assert told == ["base.yaml:7:16 '64' has no unit here", "variant.yaml:4:23 '2.0' has no unit here"]


@pytest.mark.parametrize(
    ("name", "told"),
    [
        ("../base.yaml", "variant.yaml:2:10 the base '../base.yaml' lies outside the spec's folder"),
        ("/etc/base.yaml", "variant.yaml:2:10 the base '/etc/base.yaml' lies outside the spec's folder"),
        ("variant.yaml", "variant.yaml:2:10 the base 'variant.yaml' includes itself"),
        ("missing.yaml", "variant.yaml:2:10 the base 'missing.yaml' cannot be read"),
        ("[a, b]", "variant.yaml:2:1 a list stands where a file is meant"),
    ],
)
def test_a_base_lies_beside_its_variant(tmp_path: Path, name: str, told: str) -> None:
    """A base is a file in the spec's folder or below it, and no circle."""
    assert any(line.startswith(told) for line in _read(tmp_path, VARIANT.replace("base.yaml", name)))


def test_a_link_does_not_lead_outside(tmp_path: Path) -> None:
    """A symbolic link to a file outside the folder is refused like its target."""
    outside = write(tmp_path, TEXT, "outside.yaml")
    inside = tmp_path / "inside"
    inside.mkdir()
    (inside / "link.yaml").symlink_to(outside)

    assert any("lies outside" in line for line in _read(inside, VARIANT.replace("base.yaml", "link.yaml")))


def test_circles_through_other_files_are_refused(tmp_path: Path) -> None:
    """Two files that include each other are refused at the second's line."""
    told = _read(tmp_path, "probatum-spec: 1\ninclude: base.yaml\n", "include: variant.yaml\n" + TEXT)

    assert told[0].startswith("base.yaml:1:10 the base 'variant.yaml' includes itself, directly or through others")


def test_a_long_chain_is_refused(tmp_path: Path) -> None:
    """A chain of more files than anyone needs is refused."""
    for index in range(10):
        write(tmp_path, f"probatum-spec: 1\ninclude: {index + 1}.yaml\n", f"{index}.yaml")

    with pytest.raises(SpecError, match="more than 8 files include one another"):
        read_spec(tmp_path / "0.yaml")


def test_removing_what_is_not_there_is_refused(tmp_path: Path) -> None:
    """Removing an unknown characteristic, or removing and overriding at once, is a mistake and told as one."""
    told = _read(tmp_path, VARIANT.replace("characteristic: 3", "characteristic: 33"))
    assert told == ["variant.yaml:10:9 there is no characteristic 33 to remove"]

    told = _read(tmp_path, VARIANT.replace("remove: true", "remove: true, at_most: 3 px"))
    assert told == ["variant.yaml:10:43 'at_most' stands beside remove"]

    told = _read(tmp_path, VARIANT.replace("remove: true", "remove: false"))
    assert told == ["variant.yaml:10:29 remove is 'false'"]
