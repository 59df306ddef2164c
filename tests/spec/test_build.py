"""The whole reading of a spec: every planted error gets its own sentence at its own place, and nothing else."""

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from runner.errors import SpecError
from runner.resources import folder
from runner.spec.build import from_expanded, read_spec
from runner.spec.model import PROOF_EITHER_WAY, Amount
from runner.spec.revision import canonical_json
from tests.scenes.spec_text import TEXT, planted, write

CENTRE = "centre: {position: [50 %, 50 %], size: [80 px, 120 px]}"
ONE = "{characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, at_least: 0.45}"
TWO = "{characteristic: 2, quantity: mtf50, where: corners, at_least: 0.20 cy/px}"
THREE = "{characteristic: 3, quantity: mtf50, where: corners, combine: range, at_most: 0.05 cy/px}"
DARK = "dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 4}}"
UNIT = "unit: {product: WS8, serial: 'WS8-[0-9]{6}'}"
CHART_FRAMES = "    frames: {names: 'chart-{repeat}.tif', count: 2}"


def _one(change: str) -> str:
    """Return limit 1 with its last part replaced."""
    return f"{{characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, {change}}}"


PLANTED = [
    # the text itself
    ("  bit_depth: 12 bit\n", "§\tbit_depth: 12 bit\n", "a tab stands where spaces are meant"),
    ("  fill: 100 %\n", "  fill: 100 %\n  §fill: 90 %\n", "key 'fill' stands twice; first in line 10"),
    ("fill: 100 %", "§fill:", "key 'fill' has no value"),
    ("fill: 100 %", "§fill: null", "key 'fill' has no value"),
    ("revision: C}", "§revision}", "key 'revision' has no value"),
    ("number: WS8-ACC", "number: §&a WS8-ACC", "an anchor (&a) stands here"),
    ("names: 'chart-{repeat}.tif'", "names: *§.tif", "a text begins with * or &"),
    ("number: WS8-ACC", "number: §!!str WS8-ACC", "a tag (tag:yaml.org,2002:str) stands here"),
    ("camera:\n", "§---\ncamera:\n", "a second document begins here"),
    ("  processing: none\n", "   processing§: none\n", "a second ': ' stands in one line"),
    ("uses: {dark: dark}", "uses: {dark: dark\n    regions2§: {}", "a pair of braces { } is not closed here"),
    ("'dark-{repeat}.tif'", "dark-§{repeat}.tif", "a pair of braces { } is not closed here"),
    ("  fill: 100 %\n", "  fill: §%100\n", "a character stands here that no value may begin with"),
    ("  fill: 100 %\n", "  ? §[a, b]\n  : 3\n", "a key is not a plain word"),
    # keys
    ("document: {number: WS8-ACC, ", "document: §{", "document lacks the key 'number'"),
    ("decision: {rule:", "decision: {§rulle:", "unknown key 'rulle' in decision"),
    ("  pixel_pitch:", "  §pixel_pich:", "unknown key 'pixel_pich' in camera"),
    (UNIT + "\n", "§unit_: 3\n" + UNIT + "\n", "unknown key 'unit_' in the spec"),
    ("probatum-spec: 1", "probatum-spec: §2", "2 lies outside what is allowed"),
    (UNIT, "unit: §WS8", "'WS8' stands where unit is meant"),
    # document and unit
    ("number: WS8-ACC", "number: §[1, 2]", "a list stands where a text is meant"),
    ("'WS8-[0-9]{6}'", "§'WS8-[0-9{6}'", "'WS8-[0-9{6}' is no regular expression"),
    ("'WS8-[0-9]{6}'", "§'.*'", "the serial's pattern matches an empty serial"),
    # camera and optics
    ("1600 x 1200 px", "§1600 px", "'1600 px' is no frame size"),
    ("12 bit", "§12", "'12' is no bit depth"),
    ("12 bit", "§24 bit", "'24 bit' is no bit depth"),
    ("64 DN", "§64", "'64' has no unit here"),
    ("64 DN", "§-3 DN", "'-3 DN' lies outside what is allowed"),
    ("64 DN", "§4095 DN", "the black level of 4095 DN is not below the white level"),
    ("4095 DN", "§65535 DN", "the white level of 65535 DN lies above what 12 bit can hold"),
    ("3.0 um", "§3.0 inch", "unknown unit 'inch'"),
    ("3.0 um", "§3.0 px", "unit px does not fit here"),
    ("3.0 um", "§.nan um", "'.nan um' is no number with a unit"),
    ("100 %", "§120 %", "the fill lies above the whole pixel"),
    ("  processing: none", "  processing: §sharpend", "'sharpend' is no known processing"),
    ("  processing: none", "  mosaic: §RGBG", "'RGBG' is not allowed here"),
    ("  processing: none", "  mosaic: RGGB\n  colour: §rgb", "a mosaic RGGB has one number a pixel, colour rgb three"),
    ("  processing: none", "  layout: {packing: §8 bit}", "the packing 8 bit does not hold 12 bit"),
    ("  processing: none", "  layout: {packing: §16 bit}", "16 bit without a byte order could mean two things"),
    ("  processing: none", "  layout: {header: §512}", "'512' is no number of bytes"),
    ("count: 4}", "count: 4}, sidecar: {exposure: §2}", "'2' has no unit here"),
    ("count: 4}", "count: 4}, sidecar: {require: §[serial, gian]}", "'gian' is no known field of a sidecar"),
    ("  processing: none", "  tone: §gama 2.2", "'gama 2.2' is no tone curve"),
    ("  processing: none", "  tone: §{table: [[0, 0], [0.5, 0.6], [0.4, 1]]}", "the tone table does not rise"),
    ("  processing: none", "  delivers: §jpeg", "a JPEG frame holds 8 bit, not 12"),
    ("f_number: 2.8", "f_number: §'2.8'", "'2.8' is no number"),
    ("f_number: 2.8", "f_number: §010", "'010' is no number"),
    ("f_number: 2.8", "f_number: 2.8, numerical_aperture: §0.2", "the aperture is stated twice"),
    ("f_number: 2.8", "numerical_aperture: §1.4", "a numerical aperture of 1.4 is not below the refractive index of 1"),
    # decision and uncertainty
    ("rule: proof either way", "rule: §proof eiter way", "'proof eiter way' is not allowed here"),
    ("probability: 95 %", "probability: §50 %", "a conformance probability of 50 % is not allowed"),
    ("probability: 95 %", "probability: §95", "a conformance probability of 95 is not allowed"),
    ("captures:\n", "uncertainty: [{name: §chart, of: mtf}]\ncaptures:\n", "has either relative or absolute"),
    ("captures:\n", "uncertainty: [{name: chart, of: mtf, relative: §-1 %}]\ncaptures:\n", "'-1 %' lies outside"),
    # captures and files
    ("target: slanted edge", "target: §{}", "the mapping is empty"),
    ("    target: slanted edge\n" + CHART_FRAMES, "    §" + CHART_FRAMES.strip(), "capture lacks the key 'target'"),
    ("'chart-{repeat}.tif'", "§'chart-{repaet}.tif'", "'{repaet}' is no known part of a pattern"),
    ("'chart-{repeat}.tif'", "§'chart-{repeat.tif'", "has a brace without its partner"),
    ("'chart-{repeat}.tif'", "§'../chart-{repeat}.tif'", "leaves the unit's folder"),
    ("'chart-{repeat}.tif'", "§'{repeat}-{repeat}.tif'", "'{repeat}' stands in the pattern twice"),
    ("'chart-{repeat}.tif'", "§'dark-{repeat}.tif'", "captures 'dark' and 'chart' have the same files"),
    ("'chart-{repeat}.tif'", "§'*.tif'", "a file such as dark-1.tif fits two patterns"),
    ("count: 2", "count: §0", "0 lies outside what is allowed"),
    ("count: 2", "count: §2.5", "2.5 is no whole number"),
    (CHART_FRAMES, "    same_frames_as: §drak", "there is no capture 'drak'"),
    (CHART_FRAMES, "    same_frames_as: §chart", "capture 'chart' names itself"),
    (CHART_FRAMES + "\n", CHART_FRAMES + "\n    same_frames_as: §dark\n", "has either frames or same_frames_as"),
    ("uses: {dark: dark}", "uses: {drak: §dark}", "unknown role 'drak'"),
    ("uses: {dark: dark}", "uses: {dark: §drak}", "there is no capture 'drak'"),
    ("uses: {dark: dark}", "uses: {dark: §chart}", "capture 'chart' names itself"),
    (
        "target: dark frame",
        "target: dark frame, uses: {flat: §chart}",
        "'dark' uses 'chart', which uses 'dark' in turn",
    ),
    ("    uses: {dark: dark}\n", "    chart: {due: §2027-02-30}\n", "'2027-02-30' is no day of the calendar"),
    ("    uses: {dark: dark}\n", "    chart: {transfer: §[[0.3 cy/px, 1], [0.2 cy/px, 1]]}\n", "do not rise"),
    # regions
    (CENTRE, "centre: {position: [50 %, §50], size: [80 px, 120 px]}", "50 has no unit"),
    (CENTRE, "centre: {position: §[50 %], size: [80 px, 120 px]}", "a list is no pair"),
    (CENTRE, "centre: {position: §[2 %, 50 %], size: [80 px, 120 px]}", "reaches 8 px over the left border"),
    (CENTRE, "centre: {position: [50 %, 50 %], size: §[0 px, 120 px]}", "width and height lie above zero"),
    (CENTRE, "centre: {position: [50 %, 50 %], size: §[1 px, 120 px]}", "is only 1 x 120 px"),
    (CENTRE, "centre: §{position: [50 %, 50 %]}", "region lacks the key 'size'"),
    (CENTRE, "centre: {size: §[80 px, 120 px]}", "a region has either a position or a grid"),
    (CENTRE, "centre: {on: field, position: §[50 %, 50 %], size: [80 px, 120 px]}", "on: field needs field heights"),
    (CENTRE, "centre: {grid: {columns: §0, rows: 1, from: [1 %, 1 %], to: [9 %, 9 %]}, size: [8 px, 8 px]}", "0 lies"),
    ("      corners:\n", "      §'cor/ners':\n", "'cor/ners' is no name"),
    # what makes a capture usable
    ("at most 0.01 %", "§below 0.01 %", "'below 0.01 %' is no inequality"),
    ("at most 0.01 %", "§from 3 % to 2 %", "'from 3 % to 2 %' ends below its begin"),
    # limits
    (ONE, _one("§atleast: 0.45"), "unknown key 'atleast' in limit"),
    (ONE, ONE.replace("0.25 cy/px", "§0.25"), "'0.25' has no unit here"),
    (ONE, ONE.replace("0.25 cy/px", "§0.25 DN"), "unit DN does not fit here"),
    (ONE, ONE.replace("0.25 cy/px", "§0.7 cy/px"), "0.7 cy/px lies beyond the Nyquist frequency"),
    (
        ONE,
        ONE.replace("0.25 cy/px", "§10 lp/mm object"),
        "lp/mm object cannot be converted without optics, magnification",
    ),
    (ONE, ONE.replace("where: centre", "where: §center"), "there is no region 'center'"),
    (ONE, ONE.replace("where: centre", "where: §[corners, lower right]"), "names region 'corners lower right' twice"),
    (ONE, "{characteristic: §1, quantity: mtf, frequency: 0.25 cy/px, where: centre}", "limit 1 has no limit"),
    (ONE, _one("at_least: §0.45 cy/p"), "unknown unit 'cy/p'"),
    (ONE, _one("at_least: §0.5, at_most: 0.4"), "at_least 0.5 lies above at_most 0.4"),
    (ONE, _one("at_least: 0.3, at_most: §1 px"), "length (px) is no plain ratio"),
    (ONE, _one("nominal: §0.45"), "nominal stands without tolerance"),
    (ONE, _one("nominal: 0.45, tolerance: §5 %"), "could mean two things"),
    (ONE, _one("nominal: 0.45, tolerance: §-0.1"), "a tolerance is a size, not below zero"),
    (ONE, _one("at_least: 0.45, report_only: §true"), "a value that is only reported has no limit"),
    (ONE, _one("at_least: 0.45, report_only: §yes"), "'yes' is neither true nor false"),
    (ONE, _one("measured_in: §px, at_least: 0.45"), "measured_in belongs to report_only"),
    (ONE, _one("at_least: 0.45, channel: §green"), "channel 'green' is not in mono frames"),
    (ONE, _one("at_least: §0.80"), "diffraction and pixel allow no mtf above 0.754"),
    (ONE, _one("at_least: §1.2"), "mtf cannot lie above 1"),
    (ONE, _one("at_most: §-0.1"), "mtf cannot lie below 0"),
    (TWO, TWO.replace("at_least: 0.20 cy/px", "at_least: §0.60 cy/px"), "beyond the Nyquist frequency"),
    (TWO, TWO.replace("0.20 cy/px", "§0.48 cy/px"), "diffraction and pixel allow no mtf50 above 0.4515"),
    (TWO, TWO.replace("characteristic: 2", "characteristic: §1").replace("corners", "centre"), "stands twice"),
    (TWO, TWO.replace("where: corners", "where: corners, bound: §exact"), "'exact' is not allowed here"),
    (THREE, THREE.replace("combine: range", "combine: §ratio"), "ratio needs a denominator"),
    (THREE, THREE.replace("combine: range", "combine: §spread"), "'spread' is not allowed here"),
    (THREE, THREE.replace("where: corners", "where: centre").replace("range", "§range"), "a range needs two regions"),
    (THREE, THREE.replace("combine: range, ", "against: §centre, "), "against belongs to combine: ratio"),
    (THREE, "§" + THREE.replace("combine: range, ", ""), "characteristics 2 and 3 contradict each other"),
    (THREE, "§3", "'3' stands where limit is meant"),
]


@pytest.mark.parametrize(
    ("old", "new", "sentence"), PLANTED, ids=[f"{i}-{s[:40]}" for i, (_, _, s) in enumerate(PLANTED)]
)
def test_a_planted_error_gets_its_sentence_and_place(tmp_path: Path, old: str, new: str, sentence: str) -> None:
    """A planted error is told once, in its own sentence, at its own line and column, and draws no other error."""
    text, place = planted(old, new)
    path = write(tmp_path, text)

    with pytest.raises(SpecError, match=r"spec\.yaml") as caught:
        read_spec(path)

    assert [(c.where, c.severity) for c in caught.value.complaints] == [(f"{path.as_posix()}:{place}", "error")], (
        caught.value
    )
    assert sentence in caught.value.complaints[0].found


WARNED = [
    ("'WS8-[0-9]{6}'", "§'.+'", "the serial's pattern matches any text"),
    (ONE, _one("at_least: §0"), "mtf never lies below 0: this limit cannot fail"),
    (ONE, _one("at_most: §0.90"), "an mtf above 0.754 at 0.25 cy/px cannot be"),
    (CENTRE, f"{CENTRE}\n      spare: §{CENTRE[8:]}", "no limit asks for region 'spare' of capture 'chart'"),
    (
        THREE,
        "§{characteristic: 3, quantity: mtf, frequency: 0.15 cy/px, where: corners, at_least: 0.45}",
        "implied by 2",
    ),
    (THREE, "§{characteristic: 3, quantity: mtf50, where: lower right, at_least: 0.1 cy/px}", "implied by 2"),
    (ONE, _one("nominal: §0.45, tolerance: 0.02"), "exceeds a quarter"),
    (
        DARK,
        f"{DARK}\n  spare: §{{target: dark frame, frames: 'spare.tif'}}",
        "has no limits and no other capture uses it",
    ),
    (THREE, THREE.replace("at_most: 0.05", "at_least: §0.01"), "asks the regions to differ"),
]


def test_the_spec_of_the_tests_draws_no_complaint(tmp_path: Path) -> None:
    """What the planted errors are planted in is clean, so that each complaint is about what was planted."""
    assert read_spec(write(tmp_path)).warnings == ()


def test_all_complaints_come_at_once_in_the_order_of_the_lines(tmp_path: Path) -> None:
    """Errors in every part of a file are told together, sorted by line, each once."""
    text = TEXT.replace("revision: C", "revison: C").replace("64 DN", "64").replace("count: 2", "count: two")
    text = text.replace("0.45}", "0.45 cy/p}").replace("where: corners, at_least", "where: edges, at_least")

    with pytest.raises(SpecError, match="did you mean 'revision'") as caught:
        read_spec(write(tmp_path, text))

    lines = [int(c.where.rsplit(":", 2)[1]) for c in caught.value.complaints]
    assert lines == sorted(lines)
    assert set(lines) == {2, 7, 18, 28, 29}


def test_the_ready_specs_can_be_used() -> None:
    """Every spec that travels with the program is read without a complaint or warning."""
    found = [read_spec(path) for path in sorted(folder("specs").glob("*.yaml"))]

    assert found
    assert all(spec.warnings == () for spec in found)


def test_a_spec_is_resolved(tmp_path: Path) -> None:
    """Records carry what the file says: units, defaults of the decision, groups spread into their members."""
    spec = read_spec(write(tmp_path))

    chart = spec.capture("chart")
    assert (spec.camera.width, spec.camera.height, spec.camera.bit_depth, spec.camera.pixel_pitch_um) == (
        1600,
        1200,
        12,
        3,
    )
    assert spec.optics.wavelength_um == pytest.approx(0.55, rel=1e-15)
    assert [r.name for r in chart.regions] == ["centre", "corners upper left", "corners lower right"]
    assert [r.group for r in chart.regions] == [None, "corners", "corners"]
    first, second, third = chart.limits
    assert first.parameters == {"frequency": Amount(0.25, "cy/px")}
    assert (first.characteristic, first.unit, first.at_least, first.at_most) == ("1", "1", 0.45, None)
    assert (first.rule, first.conformance_probability) == (PROOF_EITHER_WAY, 0.95)
    assert second.where == ("corners upper left", "corners lower right")
    assert (third.combine, third.unit, third.at_most) == ("range", "cy/px", 0.05)
    assert [capture.name for capture in spec.captures] == ["dark", "chart"]


def test_the_expanded_form_gives_the_same_spec_back(tmp_path: Path) -> None:
    """The expanded form, after a journey through sorted canonical JSON, rebuilds the same records and digest."""
    for path in (write(tmp_path), *folder("specs").glob("*.yaml")):
        spec = read_spec(path)
        again = from_expanded(json.loads(canonical_json(spec.expanded)))

        assert again.digest == spec.digest
        assert replace(again, source=spec.source, warnings=spec.warnings) == spec


def test_the_digest_is_of_what_is_asked(tmp_path: Path) -> None:
    """Comments, spelling of numbers, quotes and order of keys keep the digest; a limit or a revision changes it."""
    spec = read_spec(write(tmp_path))
    same = (
        TEXT.replace("3.0 um", "3 µm  # pitch")
        .replace("0.20 cy/px", '"2e-1 cy/px"')
        .replace("revision: C", "'revision': 'C'")
    )
    same = same.replace("document: {number: WS8-ACC, 'revision': 'C'}", "document: {revision: C, number: WS8-ACC}")
    assert read_spec(write(tmp_path, same)).digest == spec.digest

    for old, new in (("0.45", "0.46"), ("revision: C", "revision: D"), ("count: 2", "count: 3")):
        assert read_spec(write(tmp_path, TEXT.replace(old, new))).digest != spec.digest


def test_later_complaints_find_their_lines(tmp_path: Path) -> None:
    """What is refused when names are bound to methods is told with the line, not with words alone."""
    path = write(tmp_path)
    spec = read_spec(path)

    assert spec.place(f"{spec.source}: captures, chart, limit 2") == f"{path.as_posix()}:29:39"
    assert spec.place("captures, chart, measure, edge response") == f"{path.as_posix()}:25:30"
    assert spec.place("captures, nowhere") == f"{path.as_posix()}: captures, nowhere"


def test_a_missing_file_is_a_complaint(tmp_path: Path) -> None:
    """A spec that cannot be read is refused in one sentence that names it."""
    with pytest.raises(SpecError, match=r"none\.yaml: cannot read the file: No such file"):
        read_spec(tmp_path / "none.yaml")


def _mutations(text: str) -> list[str]:
    """Return the text with each of its keys deleted, doubled, misspelt and emptied, in block and in flow form."""
    found = []
    for key in sorted({word.strip(" {-'") for line in text.splitlines() for word in line.split(":")[:-1]}):
        word = key.split(",")[-1].strip()
        if word and text.count(f"{word}:"):
            found += [
                text.replace(f"{word}:", new, 1) for new in ("", f"{word}: 1, {word}:", f"{word}x:", f"{word}: #")
            ]
    lines = text.splitlines(keepends=True)
    return (
        found
        + ["".join(lines[:i] + lines[i + 1 :]) for i in range(len(lines))]
        + ["".join(lines[: i + 1] + lines[i:]) for i in range(len(lines))]
    )


def test_deleting_doubling_or_misspelling_any_key_never_crashes(tmp_path: Path) -> None:
    """Whatever is done to a key or a line, the outcome is a spec or complaints that name the file and a line."""
    mutations = _mutations(TEXT)
    assert len(mutations) > 150

    for text in mutations:
        _read_or_refuse(write(tmp_path, text))


def test_a_doubled_key_never_wins_silently(tmp_path: Path) -> None:
    """Every key of the file, doubled in its place, is refused (never: the last one wins)."""
    for line in TEXT.splitlines(keepends=True):
        if line.lstrip().startswith("-") or "limits" in line:
            continue
        with pytest.raises(SpecError, match=r"stands twice|indentation|is not YAML"):
            read_spec(write(tmp_path, TEXT.replace(line, line + line, 1)))


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.integers(0, len(TEXT) - 1),
    st.integers(0, 12),
    st.text(alphabet="{}[]:,#'\"&*!|>%@`-\t\n\0\x85 a0.é\U0001f600", max_size=6),
)
def test_random_damage_never_crashes(tmp_path: Path, start: int, length: int, inserted: str) -> None:
    """Random characters in a random place end in a spec or in complaints, never in another error."""
    _read_or_refuse(write(tmp_path, TEXT[:start] + inserted + TEXT[start + length :]))


def _read_or_refuse(path: Path) -> None:
    try:
        spec: Any = read_spec(path)
    except SpecError as refused:
        told = refused.complaints
        assert told
        assert all(c.where.startswith(path.as_posix()) and c.found for c in told)
    else:
        assert spec.digest.startswith("sha256:")
        assert from_expanded(json.loads(canonical_json(spec.expanded))).digest == spec.digest


@pytest.mark.parametrize(("old", "new", "sentence"), WARNED, ids=[sentence[:40] for _, _, sentence in WARNED])
def test_what_cannot_fail_or_decide_is_warned_of(tmp_path: Path, old: str, new: str, sentence: str) -> None:
    """A spec that asks for nothing sensible can be used, but says so at its line."""
    text, place = planted(old, new)
    if "quarter" in sentence:
        text = text.replace("captures:\n", "uncertainty: [{name: chart, of: mtf, relative: 2 %}]\ncaptures:\n", 1)
        place = f"{int(place.split(':')[0]) + 1}:{place.split(':')[1]}"
    path = write(tmp_path, text)

    told = {c.where: c.found for c in read_spec(path).warnings}

    assert sentence in told.get(f"{path.as_posix()}:{place}", ""), told
