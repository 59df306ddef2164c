"""A unit's files: complete, signed, made from the results as they will be read back."""

import subprocess
from datetime import UTC, datetime, timedelta
from hashlib import sha256
from io import BytesIO
from pathlib import Path
from typing import Any

import pytest
from cryptography.hazmat.primitives.serialization import Encoding
from pypdf import PdfReader

from runner.errors import SigningError
from runner.report import store
from runner.report.document import canonical, parse
from runner.report.page import html_page
from runner.report.pdf import render_pdf
from runner.report.unit_files import unit_files
from tests.report import printed_world as world
from tests.report import signed_world


@pytest.fixture(scope="module")
def authority() -> signed_world.Authority:
    """Return an authority and its station, made yesterday."""
    return signed_world.authority(made=datetime.now(UTC) - timedelta(days=1))


@pytest.fixture(scope="module")
def files(authority: signed_world.Authority) -> dict[str, bytes]:
    """Return the failing unit's files, made from results in another order of keys."""
    document: dict[str, Any] = _turned(world.failing())
    return unit_files(document, world.pictures(), authority.station, [])


def _turned(data: Any) -> Any:
    """Return plain data with the keys of every mapping in the opposite order."""
    if isinstance(data, dict):
        return {key: _turned(data[key]) for key in reversed(data)}
    return [_turned(item) for item in data] if isinstance(data, list) else data


def test_everything_is_there_and_nothing_else(files: dict[str, bytes], tmp_path: Path) -> None:
    """Results, pages, signature and pictures; a folder of them counts as complete, and lacking any it does not."""
    assert set(files) == {
        "results.json",
        "report.html",
        "report.html.p7s",
        "report.pdf",
        f"pictures/{world.PICTURE}",
    }
    for name, data in files.items():
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_bytes(data)
    assert store.is_complete(tmp_path, parse(files["results.json"]))
    for name in files:
        (tmp_path / name).rename(tmp_path / "aside")
        assert not store.is_complete(tmp_path, parse(files["results.json"]))
        (tmp_path / "aside").rename(tmp_path / name)


def test_pages_are_those_of_the_results_as_written(files: dict[str, bytes]) -> None:
    """Whoever prints the pages from results.json gets the same bytes: the HTML whole, the PDF before its signature."""
    document = parse(files["results.json"])
    unsigned = render_pdf(document, world.pictures(), files["results.json"])

    assert files["results.json"] == canonical(world.failing())
    assert files["report.html"] == html_page(document, world.pictures()).encode()
    assert files["report.pdf"].startswith(unsigned)
    assert len(files["report.pdf"]) > len(unsigned)
    attached = {name: data[0] for name, data in PdfReader(BytesIO(files["report.pdf"])).attachments.items()}
    assert attached == {"results.json": files["results.json"]} | world.pictures()


def test_listed_pictures_have_their_digests(files: dict[str, bytes]) -> None:
    """The picture beside the report is the one that the results list."""
    (listed,) = parse(files["results.json"])["pictures"]

    data = files[f"pictures/{listed['name']}"]
    assert listed["sha256"] == sha256(data).hexdigest()


def test_openssl_verifies_the_page(files: dict[str, bytes], authority: signed_world.Authority, tmp_path: Path) -> None:
    """The detached signature holds for the page and for no page that differs in one byte."""
    for name, data in (files | {"root.pem": authority.root.public_bytes(Encoding.PEM)}).items():
        (tmp_path / Path(name).name).write_bytes(data)
    order = ["openssl", "cms", "-verify", "-binary", "-inform", "DER", "-in", "report.html.p7s"]
    order += ["-content", "report.html", "-CAfile", "root.pem", "-out", "out"]

    good = subprocess.run(order, cwd=tmp_path, capture_output=True, check=False)
    (tmp_path / "report.html").write_bytes(files["report.html"].replace(b"does not conform", b"does all conform", 1))
    bad = subprocess.run(order, cwd=tmp_path, capture_output=True, check=False)

    assert good.returncode == 0, good.stderr
    assert bad.returncode != 0


@pytest.fixture
def _short_print(monkeypatch: pytest.MonkeyPatch) -> None:
    """Print one short page, where a test is on something else."""
    short = signed_world.print_pdf("<p>short</p>", {}, b"{}")
    monkeypatch.setattr("runner.report.unit_files.render_pdf", lambda *_: short)


@pytest.mark.usefixtures("_short_print")
def test_the_programs_own_faults_are_kept_beside_the_report(authority: signed_world.Authority) -> None:
    """Tracebacks go into a file for whoever mends the program, never onto a page."""
    made = unit_files(world.unmeasured(), world.pictures(), authority.station, ["Traceback: one", "Traceback: two"])

    assert made["fault.txt"] == b"Traceback: one\n\nTraceback: two"
    assert b"Traceback" not in made["report.html"]


@pytest.mark.usefixtures("_short_print")
def test_an_unreachable_time_stamp_server_is_told(authority: signed_world.Authority) -> None:
    """Nothing is handed out unsigned or unstamped when a stamp was asked for."""
    with pytest.raises(SigningError, match=r"127\.0\.0\.1:9"):
        unit_files(world.unmeasured(), world.pictures(), authority.station, [], timestamp_url="http://127.0.0.1:9/")
