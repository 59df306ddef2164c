"""The paper report: PDF/A-3u by its structure, the same bytes everywhere, nothing read from outside, nothing lost."""

import json
import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from io import BytesIO
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as ET

import pikepdf
import pytest
from pypdf import PdfReader
from weasyprint import HTML
from weasyprint.urls import FatalURLFetchingError

from runner.errors import UsageError
from runner.report.document import canonical
from runner.report.facts import report_facts
from runner.report.pdf import _closed, render_pdf
from runner.resources import folder
from tests.report import printed_world as world

PRINT = """
import json, sys
from hashlib import sha256
from runner.report.page import html_page
from runner.report.pdf import render_pdf
data = open(sys.argv[1], "rb").read()
pictures = {name: open(path, "rb").read() for name, path in json.loads(sys.argv[2]).items()}
document = json.loads(data)
print(sha256(html_page(document, pictures).encode()).hexdigest())
print(sha256(render_pdf(document, pictures, data)).hexdigest())
"""
FONTS = """<?xml version="1.0"?><!DOCTYPE fontconfig SYSTEM "fonts.dtd">
<fontconfig><dir>{0}</dir><cachedir>{0}/cache</cachedir></fontconfig>"""
MARKUP = '<link rel=attachment href="file://{0}"><img src="file://{0}"><script>x</script><b>&amp;'


@pytest.fixture(scope="module")
def printed() -> bytes:
    """Print the failing unit once."""
    return _print(world.failing())


def _print(document: dict[str, Any]) -> bytes:
    return render_pdf(document, world.pictures(), canonical(document))


def _text(pdf: bytes) -> str:
    """Return a PDF's text without white space."""
    return "".join("".join(page.extract_text() for page in PdfReader(BytesIO(pdf)).pages).split())


def _fonts(tmp_path: Path, *files: str) -> dict[str, str]:
    """Return the setting of a system that has these fonts and no others."""
    place = tmp_path / "fonts"
    place.mkdir(exist_ok=True)
    for file in files:
        shutil.copy(folder("templates") / "fonts" / file, place)
    (tmp_path / "fonts.conf").write_text(FONTS.format(place))
    return {"FONTCONFIG_FILE": str(tmp_path / "fonts.conf")}


def _run(tmp_path: Path, where: Path, settings: dict[str, str]) -> subprocess.CompletedProcess[str]:
    (tmp_path / "results.json").write_bytes(canonical(world.failing()))
    (tmp_path / "picture").write_bytes(world.picture())
    names = json.dumps({world.PICTURE: str(tmp_path / "picture")})
    root = str(Path(__file__).resolve().parents[2])
    return subprocess.run(
        [sys.executable, "-c", PRINT, str(tmp_path / "results.json"), names],
        env=os.environ | {"PYTHONPATH": root} | settings,
        cwd=where,
        capture_output=True,
        text=True,
        check=False,
    )


def test_the_bytes_depend_on_the_results_alone(tmp_path: Path) -> None:
    """Hash seed, time zone, locale, folder and the machine's own fonts change neither HTML nor PDF."""
    one = _run(tmp_path, tmp_path, {"PYTHONHASHSEED": "1", "TZ": "UTC", "LC_ALL": "C.UTF-8"})
    other = {"PYTHONHASHSEED": "2", "TZ": "Asia/Kathmandu", "LC_ALL": "C", "SOURCE_DATE_EPOCH": "86400"}
    two = _run(tmp_path, Path("/"), other | _fonts(tmp_path, "DejaVuSansMono.ttf"))

    assert (one.stderr, two.stderr) == ("", "")
    assert one.stdout == two.stdout
    assert len(one.stdout.split()) == 2


def test_a_system_without_fonts_is_told(tmp_path: Path) -> None:
    """Where the text engine would crash the whole process, a sentence says what to install."""
    ended = _run(tmp_path, tmp_path, _fonts(tmp_path))

    assert ended.returncode == 1, "an exception, no crash"
    assert "the system has no font at all; install one, e.g. the package fonts-dejavu-core" in ended.stderr


def test_it_is_pdf_a_3u_by_its_structure(printed: bytes) -> None:
    """Identification in XMP, output intent with profile, no encryption, no script, language, tags (ISO 19005-3)."""
    with pikepdf.open(BytesIO(printed)) as pdf:
        xmp = ET.fromstring(pdf.Root.Metadata.read_bytes())  # noqa: S314 - our own bytes
        about = {key: value for one in xmp.iter() for key, value in [*one.attrib.items(), (one.tag, one.text or "")]}
        schema = "{http://www.aiim.org/pdfa/ns/id/}"
        (intent,) = pdf.Root.OutputIntents

        assert printed[:5] == b"%PDF-"
        assert min(printed[printed.index(b"\n") + 2 :][:4]) > 127, "a comment of high bytes follows (6.1.2)"
        assert (about[f"{schema}part"], about[f"{schema}conformance"]) == ("3", "U")
        assert str(intent.S) == "/GTS_PDFA1"
        assert intent.DestOutputProfile.read_bytes()[36:40] == b"acsp", "an ICC profile (ICC.1, 7.2)"
        assert not pdf.is_encrypted
        assert len(pdf.trailer.ID) == 2
        assert (str(pdf.Root.Lang), bool(pdf.Root.MarkInfo.Marked)) == ("en", True)
        assert not {"/OpenAction", "/AA", "/AcroForm"} & set(pdf.Root.keys())
        assert "/JavaScript" not in pdf.Root.Names
        assert str(pdf.docinfo["/Title"]) == "Test report WS8-000103: does not conform"


def test_every_font_is_embedded_and_searchable(printed: bytes) -> None:
    """Each font brings its program and its way back to Unicode (ISO 19005-3, 6.2.11.4 and 6.2.11.7), all our own."""
    with pikepdf.open(BytesIO(printed)) as pdf:
        fonts = [one for one in _dictionaries(pdf) if one.get("/Type") == "/Font"]
        whole = [one for one in fonts if one.Subtype == "/Type0"]
        inner = [one for one in fonts if one.Subtype != "/Type0"]

        assert all("/ToUnicode" in one for one in whole)
        assert all({"/FontFile2", "/FontFile3"} & set(one.FontDescriptor.keys()) for one in inner)
        names = {str(one.BaseFont).partition("+")[2] for one in whole}
        assert names == {"Report", "Report-Bold", "Report-Mono"}


def test_pictures_are_not_smoothed(printed: bytes) -> None:
    """No picture asks for interpolation (ISO 19005-3, 6.2.8.1)."""
    with pikepdf.open(BytesIO(printed)) as pdf:
        images = [one for one in _dictionaries(pdf) if one.get("/Subtype") == "/Image"]

        assert images
        assert not any(bool(one.get("/Interpolate", False)) for one in images)


def test_exactly_the_results_and_the_pictures_are_attached(printed: bytes) -> None:
    """Bytes, relationship, type and dates in UTC of each attachment (ISO 19005-3, 6.8 and annex E)."""
    files = {"results.json": canonical(world.failing())} | world.pictures()

    with pikepdf.open(BytesIO(printed)) as pdf:
        specs = {str(one.UF): one for one in _dictionaries(pdf) if one.get("/Type") == "/Filespec"}
        listed = {str(one.UF) for one in pdf.Root.AF}

        assert specs.keys() == files.keys() == listed
        for name, data in files.items():
            stream = specs[name].EF.F
            results = name == "results.json"
            assert stream.read_bytes() == data
            assert str(specs[name].AFRelationship) == ("/Data" if results else "/Supplement")
            assert str(stream.Subtype) == ("/application/json" if results else "/image/png")
            assert {str(stream.Params[key]) for key in ("/CreationDate", "/ModDate")} == {"D:20261201093000Z"}
    assert {name: data[0] for name, data in PdfReader(BytesIO(printed)).attachments.items()} == files


@pytest.mark.parametrize("make", [world.undecided, world.unmeasured])
def test_what_the_page_says_stands_in_its_text(make: Any) -> None:
    """Verdict, sentences, values, limits, digests and names of many scripts are found by another library."""
    document = make()
    document["operator"] = "Żółć λ Щ ≤ ± ∑ µ"
    facts, text = report_facts(document), _text(_print(document))
    said = [facts.verdict.word, facts.because, facts.next, facts.time, *facts.reasons, *facts.conformity]
    said += [cell for c in facts.checks for cell in (c.number, c.where, c.value, c.limit, c.acceptance, c.probability)]
    said += [words for why in facts.not_measured for words in (why.checks, why.cause)]
    said += [cell for row in facts.frames for cell in row] + [cell for pair in facts.who for cell in pair]

    assert [words for words in said if "".join(words.split()) not in text] == []
    assert "".join(document["unit"]["serial"].split()) in text


def test_markup_in_the_data_stays_text(tmp_path: Path) -> None:
    """Serial, lot, operator, title, reason and station print as they are: no file is attached or read through them."""
    secret = tmp_path / "secret.txt"
    secret.write_text("kernel")
    markup = MARKUP.format(secret)
    document = world.document(markup, lot=f"lot {markup}", station={"name": f"bench {markup}"})
    document["operator"] = f"operator {markup}"
    document["spec"]["document"]["title"] = f"title {markup}"
    document["reasons"] = [f"reason {markup}"]
    document["next"] = f"next {markup}"

    pdf = _print(document)
    text = _text(pdf)

    for word in ("", "lot ", "bench ", "operator ", "title ", "reason ", "next "):
        assert "".join(f"{word}{markup}".split()) in text
    assert set(PdfReader(BytesIO(pdf)).attachments) == {"results.json", world.PICTURE}
    assert b"kernel" not in b"".join(one.read_bytes() for one in _streams(pdf))


@pytest.mark.parametrize(
    "markup",
    [
        '<img src="file:///etc/hostname">',
        '<link rel="stylesheet" href="http://127.0.0.1:9/x.css">',
        '<link rel="attachment" href="file:///etc/hostname">',
        "<style>@import 'https://example.invalid/x'; p {background: url(file:///etc/hostname)}</style><p>x</p>",
        '<object data="report:/other"></object>',
        '<img src="data:image/png;base64,AAAA">',
    ],
)
def test_the_fetcher_is_closed(markup: str) -> None:
    """Whatever reached the printer all the same would find nothing but the report's own files."""
    with pytest.raises(FatalURLFetchingError, match="which is none of its files"):
        HTML(string=markup, base_url="report:/", url_fetcher=_closed({})).write_pdf()


def test_a_character_without_glyph_is_named() -> None:
    """A character that the fonts lack is an error that shows it, never an empty box on a signed page."""
    document = world.document()
    document["operator"] = "Kim \U0010fffd"

    with pytest.raises(UsageError, match=r"lack: '\\U0010fffd' \(U\+10FFFD\); Latin, Greek, .* other characters"):
        _print(document)


def _dictionaries(pdf: pikepdf.Pdf) -> Iterator[Any]:
    return (one for one in pdf.objects if isinstance(one, (pikepdf.Dictionary, pikepdf.Stream)))


def _streams(pdf: bytes) -> list[Any]:
    return [one for one in pikepdf.open(BytesIO(pdf)).objects if isinstance(one, pikepdf.Stream)]


def test_what_was_printed_before_changes_nothing() -> None:
    """One process prints many reports with the same fonts: each has the bytes that it has alone."""
    first = _print(world.document())
    _print(world.failing())

    assert _print(world.document()) == first


def test_printing_leaves_no_file_behind(tmp_path: Path) -> None:
    """The renderer's folder of fonts goes with the process, also with one that another has forked."""
    (tmp_path / "script.py").write_text(
        "import sys\n"
        "from multiprocessing import get_context\n"
        "from runner.report.document import canonical\n"
        "from runner.report.pdf import render_pdf\n"
        "from tests.report import printed_world as world\n"
        "def work():\n"
        "    render_pdf(world.document(), world.pictures(), canonical(world.document()))\n"
        "if __name__ == '__main__':\n"
        "    worker = get_context('forkserver').Process(target=work)\n"
        "    worker.start()\n"
        "    worker.join()\n"
        "    work()\n"
        "    sys.exit(worker.exitcode)\n"
    )
    root = str(Path(__file__).resolve().parents[2])
    with tempfile.TemporaryDirectory() as scratch:  # not below tmp_path: sockets of workers need a short path
        environment = os.environ | {"PYTHONPATH": root, "TMPDIR": scratch}
        subprocess.run([sys.executable, "script.py"], cwd=tmp_path, env=environment, check=True, timeout=120)

        assert list(Path(scratch).iterdir()) == []
