"""Signed files hold with the tools that readers have, and all but the signature value follows from its inputs."""

import re
import subprocess
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.serialization import Encoding

from runner.errors import SigningError
from runner.report import certificates as profiles
from runner.report import cms_form, sign, verify_pdf
from runner.report.keys import StationKey
from tests.report import attacks, stamp_server
from tests.report import signed_world as world


@pytest.fixture(scope="module")
def readers(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with a signed report, its data, and the root as readers' tools want it."""
    folder = tmp_path_factory.mktemp("readers")
    now = datetime.now(UTC)
    made = world.authority(made=now - timedelta(days=1))
    page = world.html_page(world.results(), world.PICTURES).encode()
    (folder / "report.pdf").write_bytes(sign.sign_pdf(attacks.target().unsigned, made.station, time=now))
    (folder / "report.html").write_bytes(page)
    (folder / "report.html.p7s").write_bytes(sign.sign_detached(page, made.station))
    (folder / "root.pem").write_bytes(made.root.public_bytes(Encoding.PEM))
    _run(folder, "certutil", "-N", "-d", "sql:.", "--empty-password")
    _run(folder, "certutil", "-A", "-d", "sql:.", "-n", "plant", "-t", ",C,", "-a", "-i", "root.pem")
    return folder


def _run(folder: Path, *order: str) -> str:
    done = subprocess.run(order, cwd=folder, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout + done.stderr


def test_pdfsig_trusts_the_report_given_the_root(readers: Path) -> None:
    """Poppler's pdfsig: valid, trusted, the whole document."""
    told = _run(readers, "pdfsig", "-nssdir", "sql:.", "report.pdf")

    assert "Signature is Valid." in told
    assert "Certificate is Trusted." in told
    assert "Total document signed" in told
    assert "ETSI.CAdES.detached" in told
    assert told.count("Signature #") == 1


def test_pdfdetach_takes_the_data_out(readers: Path) -> None:
    """Poppler's pdfdetach finds results.json and the pictures, byte for byte."""
    _run(readers, "pdfdetach", "-saveall", "-o", ".", "report.pdf")

    assert (readers / "results.json").read_bytes() == world.canonical(world.results())
    assert (readers / "chart-overview.png").read_bytes() == world.PICTURES["chart-overview.png"]


def test_openssl_verifies_the_page_given_the_root(readers: Path) -> None:
    """The line that the manual gives to readers of HTML reports."""
    order = "openssl cms -verify -binary -inform DER -in report.html.p7s -content report.html -CAfile root.pem -out out"

    assert "Verification successful" in _run(readers, *order.split())
    assert (readers / "out").read_bytes() == (readers / "report.html").read_bytes()


def test_openssl_verifies_the_pdf_from_its_parts(readers: Path) -> None:
    """The signature in a PDF can be checked with openssl alone: cut out the byte range (ISO 32000-2, 12.8.1)."""
    pdf = (readers / "report.pdf").read_bytes()
    start, end = attacks.gap(pdf)
    (readers / "covered").write_bytes(pdf[: start - 1] + pdf[end + 1 :])
    (readers / "pdf.p7s").write_bytes(attacks.der_of(pdf))

    order = "openssl cms -verify -cades -binary -inform DER -in pdf.p7s -content covered -CAfile root.pem -out out"

    assert "Verification successful" in _run(readers, *order.split())


def test_all_but_the_signature_follows_from_the_inputs() -> None:
    """Two signatures of one file at one time differ in nothing but the gap."""
    t = attacks.target()

    again = sign.sign_pdf(t.unsigned, t.authority.station, time=world.SIGNED)

    assert again != t.signed
    assert verify_pdf.read_signature(again).blank == verify_pdf.read_signature(t.signed).blank
    assert again.startswith(t.unsigned)


def test_metadata_stay_as_they_were() -> None:
    """Signing rewrites no XMP and no document information: the file stays PDF/A-3 and names its own producer."""
    t = attacks.target()
    added = t.signed[len(t.unsigned) :]

    assert b"/Producer" not in added
    assert b"xpacket" not in added
    assert b"/Version" not in added


def test_the_field_is_invisible_and_named() -> None:
    """An invisible field with a readable name is the accessible choice (ISO 14289-1, 7.18.4, from memory)."""
    added = attacks.target().signed[len(attacks.target().unsigned) :]

    assert b"/Rect [ 0 0 0 0 ]" in added
    assert b"/TU (Signature of the test station)" in added
    assert re.search(rb"/TransformMethod /DocMDP\s+/TransformParams <<[^>]*/P 1\s", added)


def test_the_time_is_the_claimed_one() -> None:
    """Fractions of a second are cut; other zones are turned into UTC."""
    t = attacks.target()
    moment = datetime(2026, 3, 14, 12, 30, 15, 999999, tzinfo=UTC)

    signed = verify_pdf.read_signature(sign.sign_pdf(t.unsigned, t.authority.station, time=moment))

    assert signed.time == moment.replace(microsecond=0)


@pytest.mark.parametrize("years", [-1, 3])
def test_out_of_the_certificates_time_nothing_is_signed(years: int) -> None:
    """A station that signs with an expired certificate would only make refused reports."""
    t = attacks.target()
    moment = world.SIGNED + timedelta(days=365 * years)

    with pytest.raises(SigningError, match="lies outside the certificate's"):
        sign.sign_pdf(t.unsigned, t.authority.station, time=moment)
    with pytest.raises(SigningError, match="lies outside the certificate's"):
        sign.sign_detached(b"page", t.authority.station, time=moment)


def test_a_time_without_a_zone_is_refused() -> None:
    """Nobody can tell later what it meant."""
    naive = world.SIGNED.replace(tzinfo=None)

    with pytest.raises(SigningError, match="no time zone"):
        sign.sign_detached(b"page", world.authority().station, time=naive)


@pytest.mark.parametrize("data", [b"", b"no pdf", b"%PDF-1.7\n%%EOF\n"])
def test_what_is_no_pdf_is_not_signed(data: bytes) -> None:
    """A damaged file ends in a sentence."""
    with pytest.raises(SigningError, match="the PDF cannot be signed"):
        sign.sign_pdf(data, world.authority().station, time=world.SIGNED)


def test_a_signed_report_is_not_signed_again() -> None:
    """A second signature would change what the first one closed."""
    t = attacks.target()

    with pytest.raises(SigningError, match="signed before"):
        sign.sign_pdf(t.signed, t.authority.station, time=world.SIGNED)


def test_long_names_fit() -> None:
    """The room for a signature grows with its certificate."""
    key = world.authority("Ä" * 32, "ß" * 32).station

    verify_pdf.read_signature(sign.sign_pdf(attacks.target().unsigned, key, time=world.SIGNED))


def test_two_hundred_signatures_fit() -> None:
    """DER lengths of ECDSA values vary by some bytes; none may ever be larger than the room left for it."""
    key = world.authority().station
    prepared = sign.prepare(attacks.target().unsigned, key.certificate, world.SIGNED, stamped=False)
    room = (prepared.end - prepared.start - 2) // 2

    sizes = []
    for n in range(200):
        digest = n.to_bytes(32, "big")
        value = cms_form.sign_digest(digest, key.private, key.certificate, None)
        sizes.append(len(cms_form.build(digest, key.certificate, None, value)))

    assert max(sizes) < room


def test_a_time_stamp_is_carried_along(tmp_path: Path) -> None:
    """PAdES B-T: the stamp over the signature value is the one unsigned attribute; pdfsig still finds it valid."""
    stamp_server.make(tmp_path)
    made = world.authority(made=datetime.now(UTC) - timedelta(days=1))

    with stamp_server.serving(tmp_path) as url:
        pdf = sign.sign_pdf(attacks.target().unsigned, made.station, time=datetime.now(UTC), timestamp_url=url)
        page = sign.sign_detached(b"page", made.station, timestamp_url=url)

    signed = verify_pdf.read_signature(pdf)
    verify_pdf.check_structure(signed)
    (tmp_path / "report.pdf").write_bytes(pdf)
    assert signed.signature.time_stamp is not None
    assert len(page) > len(sign.sign_detached(b"page", made.station)) + 500
    assert "Signature is Valid." in _run(tmp_path, "pdfsig", "-nocert", "report.pdf")


def test_a_server_that_is_down_stops_signing_or_not(tmp_path: Path) -> None:
    """By the caller's choice: refuse, or sign without a stamp."""
    made = world.authority()
    down = "http://127.0.0.1:9/"

    with pytest.raises(SigningError, match="did not serve"):
        sign.sign_pdf(attacks.target().unsigned, made.station, time=world.SIGNED, timestamp_url=down)
    with pytest.raises(SigningError, match="did not serve"):
        sign.sign_detached(b"page", made.station, time=world.SIGNED, timestamp_url=down)
    pdf = sign.sign_pdf(
        attacks.target().unsigned, made.station, time=world.SIGNED, timestamp_url=down, stamp_required=False
    )
    page = sign.sign_detached(b"page", made.station, time=world.SIGNED, timestamp_url=down, stamp_required=False)

    assert verify_pdf.read_signature(pdf).signature.time_stamp is None
    assert cms_form.length(page) == len(page) < 2000


def test_a_large_certificate_has_its_room() -> None:
    """A certificate of 4,000 bytes fits as well."""
    made = world.authority()
    long = "http://crl.example/" + "x" * 3000
    key = profiles.new_private_key()
    certificate = profiles.station_certificate(key.public_key(), "Bench", made.root, made.root_key, world.MADE, long)

    pdf = sign.sign_pdf(attacks.target().unsigned, StationKey(key, certificate), time=world.SIGNED)

    assert verify_pdf.read_signature(pdf).signature.certificate == certificate
