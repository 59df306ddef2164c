"""The program's own tools give a real report again from its results alone: the same bytes, or a refusal."""

import os
import subprocess
import sys
import tempfile
from copy import deepcopy
from hashlib import sha256
from pathlib import Path
from typing import Any

import pytest

from runner.errors import UsageError, VerificationRefused
from runner.report import verify_tools
from tests.report import signed_world as world

TOOLS = verify_tools.default_tools()


def _real() -> tuple[dict[str, Any], dict[str, bytes], bytes]:
    unit = world.shared_bench().unit
    results = (unit / "results.json").read_bytes()
    return TOOLS.parse(results), world.pictures_of(unit), results


def test_judging_again_gives_the_whole_document_again() -> None:
    """All that a report states follows from spec, readings and the run's facts, to the last digit on one machine."""
    document, _, _ = _real()

    assert TOOLS.judge_again(document) == document


def test_a_limit_moved_in_the_spec_moves_the_verdict() -> None:
    """Judging again uses the limits inside, not those that the checks repeat."""
    document = deepcopy(_real()[0])
    value = document["checks"][0]["value"]
    document["spec"]["captures"][1]["chart"]["limits"][0]["at_least"] = f"{2 * value:.3f} cy/px"

    assert TOOLS.judge_again(document)["verdict"] == "does not conform"


def test_pages_come_out_again_in_another_process() -> None:
    """Another process with another hash seed, time zone and working folder prints the same bytes as were signed."""
    bench = world.shared_bench()
    script = (
        "import sys, hashlib, pathlib\n"
        "from runner.report.verify_tools import default_tools\n"
        "from tests.report.signed_world import pictures_of\n"
        "tools, unit = default_tools(), pathlib.Path(sys.argv[1])\n"
        "results = (unit / 'results.json').read_bytes()\n"
        "document, pictures = tools.parse(results), pictures_of(unit)\n"
        "print(hashlib.sha256(tools.render_pdf(document, pictures, results)).hexdigest())\n"
        "print(hashlib.sha256(tools.html_page(document, pictures).encode()).hexdigest())\n"
    )
    root = Path(__file__).resolve().parents[2]
    more = {"PYTHONHASHSEED": "77", "TZ": "Asia/Kathmandu", "PYTHONPATH": str(root)}
    order = [sys.executable, "-c", script, str(bench.unit)]
    done = subprocess.run(order, env=os.environ | more, cwd=bench.frames, capture_output=True, text=True, check=True)
    pdf, page = done.stdout.split()
    document, pictures, results = _real()

    assert page == sha256((bench.unit / "report.html").read_bytes()).hexdigest()
    printed = TOOLS.render_pdf(document, pictures, results)
    assert pdf == sha256(printed).hexdigest()
    assert (bench.unit / "report.pdf").read_bytes().startswith(printed)


@pytest.mark.parametrize("kind", ["pdf", "html"])
def test_another_edition_of_the_templates_is_not_guessed(kind: str) -> None:
    """A report printed with templates that this version lacks cannot be compared, and is not called false."""
    document, pictures, results = _real()
    document = document | {"program": document["program"] | {"template": "2"}}

    with pytest.raises(VerificationRefused, match="edition 2 of the templates, this version has 1; verify it with"):
        TOOLS.render_pdf(document, pictures, results) if kind == "pdf" else TOOLS.html_page(document, pictures)


def test_measuring_again_gives_document_and_pictures_again() -> None:
    """From the frames alone the same results come out, pictures byte for byte."""
    document, pictures, _ = _real()

    again, painted = TOOLS.measure_again(document, world.shared_bench().frames)

    assert painted == pictures
    left_out = {"pictures", "unused", "earlier"}
    assert {k: v for k, v in again.items() if k not in left_out} == {
        k: v for k, v in document.items() if k not in left_out
    }


def test_frames_of_other_units_only_are_told(tmp_path: Path) -> None:
    """A folder that holds nothing of this unit ends in a sentence with the unit and the place."""
    (tmp_path / "WS8-000999").mkdir()

    with pytest.raises(UsageError, match=r"no frames of unit WS8-000101; there are WS8-000999"):
        TOOLS.measure_again(_real()[0], tmp_path)


def test_the_lots_files_come_out_again() -> None:
    """All four files of a real lot follow from the units' results."""
    reports = world.shared_bench().reports
    documents = tuple(TOOLS.parse(file.read_bytes()) for file in sorted(reports.glob("*/results.json")))

    files = TOOLS.lot_files({"unused": []}, documents)

    assert len(documents) == 2
    assert files == {name: (reports / name).read_bytes() for name in files}
    assert set(files) == {"lot.json", "lot.html", "lot.csv", "lot-values.json"}


def test_a_strangers_serial_is_no_path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Before a signer is vouched for, the serial is a stranger's word: nothing is written where it points."""
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path / "scratch"))
    (tmp_path / "scratch").mkdir()
    document = deepcopy(_real()[0])
    document["unit"]["serial"] = "../../out"

    TOOLS.lot_files({"unused": []}, (document,))

    assert sorted(path.name for path in tmp_path.rglob("*")) == ["scratch"]


def test_strict_reading_is_the_programs_own() -> None:
    """What verification parses are canonical bytes and nothing else."""
    results = _real()[2]

    with pytest.raises(VerificationRefused, match="not in canonical form"):
        TOOLS.parse(results.replace(b'":', b'": ', 1))
