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
    ("  processing: none", "  mosaic: §RGGB", "mosaic RGGB cannot be measured by this release"),
    ("  processing: none", "  colour: §rgb", "colour rgb cannot be measured by this release"),
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
    ("target: dark frame", "target: dark frame, uses: {flat: §chart}", "'dark' uses 'chart', which uses 'dark' in turn"),
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
    (ONE, ONE.replace("0.25 cy/px", "§10 lp/mm object"), "lp/mm object cannot be converted without optics, magnification"),
    (ONE, ONE.replace("where: centre", "where: §center"), "there is no region 'center'"),
    (ONE, ONE.replace("where: centre", "where: §[corners, lower right]"), "names region 'corners lower right' twice"),
    (ONE, "§" + ONE.replace("where: centre, ", ""), "limit 1 does not say where"),
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


@pytest.mark.parametrize(("old", "new", "sentence"), PLANTED, ids=[f"{i}-{s[:40]}" for i, (_, _, s) in enumerate(PLANTED)])
def test_a_planted_error_gets_its_sentence_and_place(tmp_path: Path, old: str, new: str, sentence: str) -> None:
    """A planted error is told once, in its own sentence, at its own line and column, and draws no other error."""
    text, place = planted(old, new)
    path = write(tmp_path, text)

    with pytest.raises(SpecError, match="spec.yaml") as caught:
        read_spec(path)

    assert [(c.where, c.severity) for c in caught.value.complaints] == [(f"{path.as_posix()}:{place}", "error")], caught.value
    assert sentence in caught.value.complaints[0].found
