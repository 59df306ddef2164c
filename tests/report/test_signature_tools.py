"""Other people's tools accept what the program itself signed, given the root, and find what was changed.

The tools: pdfsig and pdfdetach of Poppler, openssl, and certutil of NSS, whose store pdfsig reads. A machine without
them fails here rather than passing over it; `tests/run` installs them.
"""

import subprocess
from datetime import UTC, datetime
from hashlib import sha256
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.serialization import Encoding

from runner.report.certificates import revocation_list
from tests.report import attacks
from tests.report import signed_world as world


@pytest.fixture(scope="module")
def reader(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A reader's folder: the root as PEM, and a store of trusted authorities that holds it."""
    folder = tmp_path_factory.mktemp("reader")
    (folder / "root.pem").write_bytes(world.shared_bench().authority.root.public_bytes(Encoding.PEM))
    (folder / "look-alike.pem").write_bytes(world.authority().root.public_bytes(Encoding.PEM))
    for name, root in (("trusting", "root.pem"), ("fooled", "look-alike.pem")):
        (folder / name).mkdir()
        _run(folder, f"certutil -N -d sql:{name} --empty-password")
        _run(folder, f"certutil -A -d sql:{name} -n plant -t ,C, -a -i {root}")
    return folder


def _run(folder: Path, order: str, *files: Path) -> str:
    done = _ended(folder, order, *files)
    assert done.returncode == 0, done.stderr
    return done.stdout + done.stderr


def _ended(folder: Path, order: str, *files: Path) -> subprocess.CompletedProcess[str]:
    words = [*order.split(), *map(str, files)]
    return subprocess.run(words, cwd=folder, capture_output=True, text=True, check=False)


def test_pdfsig_finds_a_trusted_signature_over_the_whole_file(reader: Path) -> None:
    """Valid, trusted, total, of the PAdES kind, and one."""
    told = _run(reader, "pdfsig -nssdir sql:trusting", world.shared_bench().unit / "report.pdf")

    assert "Signature is Valid." in told
    assert "Certificate is Trusted." in told
    assert "Total document signed" in told
    assert "ETSI.CAdES.detached" in told
    assert told.count("Signature #") == 1
    assert "Bench 2" in told


def test_pdfsig_tells_a_look_alike_apart(reader: Path) -> None:
    """An authority of the same name vouches for nothing."""
    told = _run(reader, "pdfsig -nssdir sql:fooled", world.shared_bench().unit / "report.pdf")

    assert "Signature is Valid." in told
    assert "Certificate is Trusted." not in told


def test_pdfsig_finds_a_changed_bit(reader: Path) -> None:
    """It ends with 0 all the same; only its words tell, which is why `probatum verify` exists."""
    data = bytearray((world.shared_bench().unit / "report.pdf").read_bytes())
    data[data.index(b"stream\n") + 40] ^= 1
    (reader / "changed.pdf").write_bytes(data)

    told = _run(reader, "pdfsig -nssdir sql:trusting", reader / "changed.pdf")

    assert "Digest Mismatch" in told
    assert "Signature is Valid." not in told


def test_pdfdetach_takes_results_and_pictures_out(reader: Path) -> None:
    """Exactly the files beside the report, byte for byte."""
    unit = world.shared_bench().unit
    (reader / "out").mkdir()
    _run(reader, "pdfdetach -saveall -o out", unit / "report.pdf")

    found = {file.name: file.read_bytes() for file in (reader / "out").iterdir()}
    assert found == {"results.json": (unit / "results.json").read_bytes(), **world.pictures_of(unit)}


CMS = "openssl cms -verify -binary -inform DER -out /dev/null"


def test_openssl_verifies_the_page(reader: Path) -> None:
    """The line that the manual gives; with another authority's root or another page it refuses."""
    unit = world.shared_bench().unit
    order = f"{CMS} -in {unit / 'report.html.p7s'}"
    (reader / "changed.html").write_bytes((unit / "report.html").read_bytes().replace(b"conforms", b"conformed", 1))

    assert "Verification successful" in _run(reader, f"{order} -CAfile root.pem -content", unit / "report.html")
    assert _ended(reader, f"{order} -CAfile look-alike.pem -content", unit / "report.html").returncode != 0
    assert _ended(reader, f"{order} -CAfile root.pem -content", reader / "changed.html").returncode != 0


def test_openssl_verifies_the_pdf_from_its_parts(reader: Path) -> None:
    """The bytes around the gap are the signed ones (ISO 32000-2, 12.8.1); CAdES attributes hold as well."""
    pdf = (world.shared_bench().unit / "report.pdf").read_bytes()
    start, end = attacks.gap(pdf)
    (reader / "covered").write_bytes(pdf[: start - 1] + pdf[end + 1 :])
    (reader / "pdf.p7s").write_bytes(attacks.der_of(pdf))

    told = _run(reader, f"{CMS} -cades -in pdf.p7s -CAfile root.pem -content covered")

    assert "Verification successful" in told


def test_openssl_reads_the_same_digest_and_one_certificate(reader: Path) -> None:
    """The message digest inside is that of the page; the station's certificate is alone in there."""
    unit = world.shared_bench().unit
    page = (unit / "report.html").read_bytes()

    told = _run(reader, "openssl asn1parse -inform DER -in", unit / "report.html.p7s")
    listed = _run(reader, "openssl pkcs7 -print_certs -noout -inform DER -in", unit / "report.html.p7s")

    assert sha256(page).hexdigest().upper() in told
    assert listed.count("subject=") == 1


def test_openssl_finds_the_station_revoked(reader: Path) -> None:
    """The revocation list that `keys renew-crl` writes is one for openssl, too (RFC 5280, 5)."""
    made = world.shared_bench().authority
    (reader / "station.pem").write_bytes(made.station.certificate.public_bytes(Encoding.PEM))
    order = "openssl verify -CAfile root.pem -crl_check -CRLfile list.pem station.pem"
    for revoke, code in ((None, 0), (made.station.certificate, 2)):
        crl = revocation_list(made.root, made.root_key, datetime.now(UTC), revoke=revoke)
        (reader / "list.pem").write_bytes(crl.public_bytes(Encoding.PEM))
        done = _ended(reader, order)
        assert done.returncode == code, done.stderr
        assert ("certificate revoked" in done.stderr) == (revoke is not None)
