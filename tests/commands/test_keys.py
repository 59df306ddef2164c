"""`probatum keys` as typed: files for their owner alone, certificates that readers' tools accept, plain sentences."""

import os
import pty
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.x509.oid import ExtendedKeyUsageOID, ExtensionOID

from runner.cli import run
from runner.exits import Exit
from runner.report import keys

SECRET, OTHER = "walnut shell", "kernel"


@pytest.fixture
def plant(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Path]:
    """Yield a folder with an authority and a station, made on the command line under the most open umask."""
    umask = os.umask(0)
    monkeypatch.setattr(keys, "KDF_ROUNDS", 1000)
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("PROBATUM_PASSPHRASE", SECRET)
    assert run(["keys", "make-authority", "authority", "--name", "Walnut Works test authority"]) == Exit.CONFORMS
    monkeypatch.setenv("PROBATUM_PASSPHRASE", OTHER)
    monkeypatch.setenv("PROBATUM_AUTHORITY_PASSPHRASE", SECRET)
    assert run(_station("station")) == Exit.CONFORMS
    yield tmp_path
    os.umask(umask)


def _station(folder: str, *more: str) -> list[str]:
    return ["keys", "make-station", folder, "--name", "Bench 2", "--authority", "authority", *more]


def _openssl(*order: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(["openssl", *order], capture_output=True, text=True, check=False)


def test_what_is_made_and_what_is_told(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """An authority has key, root and list, a station its key and both certificates; the next step is told."""
    assert {p.name for p in (plant / "authority").iterdir()} == {"authority.pem", "root.pem", "root.crl"}
    assert {p.name for p in (plant / "station").iterdir()} == {"station.p12", "station.crt", "root.pem"}
    assert {oct(p.stat().st_mode & 0o777) for p in plant.glob("*/*")} == {"0o600"}
    assert {oct(p.stat().st_mode & 0o777) for p in plant.iterdir()} == {"0o700"}
    assert run(["keys", "make-authority", "second", "--name", "A"]) == Exit.CONFORMS
    assert run(_station("third")) == Exit.CONFORMS
    assert capsys.readouterr().out == (
        "authority 'A' made in second; give second/root.pem to whoever reads reports, keep the rest offline\n"
        "station 'Bench 2' made; sign with: probatum run … --key third/station.p12\n"
    )


def test_no_key_lies_open(plant: Path) -> None:
    """Neither pass phrase nor an unencrypted key stands in any file."""
    data = b"".join(p.read_bytes() for p in plant.glob("*/*"))

    assert b"BEGIN ENCRYPTED PRIVATE KEY" in (plant / "authority/authority.pem").read_bytes()
    assert b"BEGIN PRIVATE KEY" not in data
    assert b"BEGIN EC PRIVATE KEY" not in data
    assert SECRET.encode() not in data
    assert OTHER.encode() not in data


def test_the_station_may_sign_and_nothing_else(plant: Path) -> None:
    """P-256; key usage critical, for signatures that bind; purposes of both kinds; a place of revocation (RFC 5280)."""
    certificate = x509.load_pem_x509_certificate((plant / "station/station.crt").read_bytes())
    usage = certificate.extensions.get_extension_for_oid(ExtensionOID.KEY_USAGE)
    purposes = certificate.extensions.get_extension_for_oid(ExtensionOID.EXTENDED_KEY_USAGE)
    basic = certificate.extensions.get_extension_for_class(x509.BasicConstraints)
    public = certificate.public_key()

    assert isinstance(public, ec.EllipticCurvePublicKey)
    assert public.curve.name == "secp256r1"
    assert usage.critical
    names = (
        "digital_signature",
        "content_commitment",
        "key_encipherment",
        "key_agreement",
        "key_cert_sign",
        "crl_sign",
    )
    assert [getattr(usage.value, name) for name in names] == [True, True, False, False, False, False]
    assert not purposes.critical
    signing = x509.ObjectIdentifier("1.3.6.1.5.5.7.3.36")  # RFC 9336, 3.1
    assert set(purposes.value) == {signing, ExtendedKeyUsageOID.EMAIL_PROTECTION}  # type: ignore[call-overload]
    assert basic.value.ca is False
    assert certificate.extensions.get_extension_for_class(x509.CRLDistributionPoints).value
    assert 729 <= (certificate.not_valid_after_utc - certificate.not_valid_before_utc).days <= 731


def test_the_authority_issues_stations_and_nothing_below(plant: Path) -> None:
    """A critical CA of path length 0 that signs certificates and lists only."""
    root = x509.load_pem_x509_certificate((plant / "authority/root.pem").read_bytes())
    basic = root.extensions.get_extension_for_class(x509.BasicConstraints)
    usage = root.extensions.get_extension_for_class(x509.KeyUsage)

    assert (basic.critical, basic.value.ca, basic.value.path_length) == (True, True, 0)
    assert (usage.critical, usage.value.key_cert_sign, usage.value.crl_sign) == (True, True, True)
    assert not usage.value.digital_signature


def test_openssl_accepts_the_chain(plant: Path) -> None:
    """OpenSSL verifies station under root for signed mail, with the list, and not under another root."""
    chain = ["verify", "-x509_strict", "-purpose", "smimesign", "-CAfile"]
    good = _openssl(*chain, "authority/root.pem", "station/station.crt")
    listed = ["-crl_check", "-CRLfile", "authority/root.crl"]
    with_list = _openssl(*chain, "authority/root.pem", *listed, "station/station.crt")
    (plant / "other").mkdir()
    assert run(["keys", "make-authority", "other", "--name", "Walnut Works test authority"]) == Exit.CONFORMS
    foreign = _openssl(*chain, "other/root.pem", "station/station.crt")

    assert good.stdout == "station/station.crt: OK\n", good.stderr
    assert with_list.stdout == "station/station.crt: OK\n", with_list.stderr
    assert foreign.returncode != 0


def test_a_revoked_station_is_refused_by_openssl(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """After renewing the list with the station on it, a reader with the list refuses the station."""
    order = ["keys", "renew-crl", "--authority", "authority", "--revoke", "station/station.crt"]

    assert run(order) == Exit.CONFORMS
    assert "authority/root.crl written" in capsys.readouterr().out
    checked = _openssl(
        *("verify", "-CAfile", "authority/root.pem", "-crl_check", "-CRLfile", "authority/root.crl"),
        "station/station.crt",
    )
    assert "certificate revoked" in checked.stderr


def test_the_list_has_the_address_that_was_given(plant: Path) -> None:
    """`--crl-url` goes into the certificate, `--pem` changes the form of the key."""
    assert run(_station("second", "--pem", "--crl-url", "http://walnut.invalid/root.crl")) == Exit.CONFORMS

    text = _openssl("x509", "-in", "second/station.crt", "-noout", "-text").stdout
    assert "URI:http://walnut.invalid/root.crl" in text
    assert b"BEGIN ENCRYPTED PRIVATE KEY" in Path("second/station.pem").read_bytes()


def test_nothing_is_overwritten(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A second key in the same place is refused with one sentence; every byte stays."""
    before = {p: p.read_bytes() for p in plant.glob("*/*")}
    capsys.readouterr()

    assert run(["keys", "make-authority", "authority", "--name", "Another"]) == Exit.USAGE
    assert run(_station("station")) == Exit.USAGE

    assert capsys.readouterr().err == (
        "authority: something stands there already; choose a new folder; keys are never overwritten\n"
        "station: something stands there already; choose a new folder; keys are never overwritten\n"
    )
    assert {p: p.read_bytes() for p in plant.glob("*/*")} == before


def test_a_wrong_pass_phrase_is_told_plainly(
    plant: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """One sentence names the file that does not open; nothing is made."""
    monkeypatch.setenv("PROBATUM_AUTHORITY_PASSPHRASE", "wrong")
    capsys.readouterr()

    assert run(_station("second")) == Exit.USAGE

    assert capsys.readouterr().err == "authority/authority.pem: the pass phrase does not open it\n"
    assert sorted(p.name for p in plant.iterdir()) == ["authority", "station"]


def test_a_file_goes_before_the_environment(plant: Path) -> None:
    """Pass phrases from files open and lock the keys, whatever the environment holds."""
    (plant / "new.txt").write_text("third\n")
    (plant / "authority.txt").write_text(f"{SECRET}\n")
    files = ["--passphrase-file", "new.txt", "--authority-passphrase-file", "authority.txt"]

    assert run(_station("second", *files)) == Exit.CONFORMS
    assert keys.load_key(plant / "second/station.p12", b"third").certificate


@pytest.mark.parametrize(
    ("given", "sentence"),
    [
        (
            {"PROBATUM_AUTHORITY_PASSPHRASE": SECRET},
            "the pass phrase of the new key is missing; set PROBATUM_PASSPHRASE",
        ),
        (
            {"PROBATUM_PASSPHRASE": "", "PROBATUM_AUTHORITY_PASSPHRASE": SECRET},
            "the pass phrase of the new key is empty; set PROBATUM_PASSPHRASE",
        ),
        (
            {"PROBATUM_PASSPHRASE": OTHER},
            "the pass phrase of the authority is missing; set PROBATUM_AUTHORITY_PASSPHRASE",
        ),
    ],
)
def test_a_missing_pass_phrase_says_where_to_put_it(
    plant: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    given: dict[str, str],
    sentence: str,
) -> None:
    """Where nobody can be asked, the sentence names key, variable and option."""
    for name in ("PROBATUM_PASSPHRASE", "PROBATUM_AUTHORITY_PASSPHRASE"):
        monkeypatch.delenv(name, raising=False)
    for name, value in given.items():
        monkeypatch.setenv(name, value)
    capsys.readouterr()

    assert run(_station("second")) == Exit.USAGE

    told = capsys.readouterr().err
    assert told.startswith(f"{sentence}, give --")
    assert told.endswith("passphrase-file, or run on a terminal\n")
    assert not Path("second").exists()


def test_a_terminal_is_asked_twice_and_shows_nothing(tmp_path: Path) -> None:
    """At a prompt the new pass phrase is typed twice, never shown, and opens the key."""
    ours, theirs = pty.openpty()
    root = str(Path(__file__).resolve().parents[2])
    environment = {k: v for k, v in os.environ.items() if not k.startswith("PROBATUM_")} | {"PYTHONPATH": root}
    order = [sys.executable, "-m", "runner", "keys", "make-authority", "made", "--name", "A"]
    typing = subprocess.Popen(
        order, cwd=tmp_path, env=environment, stdin=theirs, stdout=theirs, stderr=theirs, start_new_session=True
    )
    os.close(theirs)

    shown = _answer(ours, f"{SECRET}\n".encode())

    assert typing.wait(timeout=30) == 0, shown
    assert shown.count(b"Pass phrase of the new key") == 1
    assert SECRET.encode() not in shown
    opened = _openssl("pkey", "-in", str(tmp_path / "made/authority.pem"), "-passin", f"pass:{SECRET}", "-noout")
    assert opened.returncode == 0


def _answer(terminal: int, line: bytes) -> bytes:
    """Type a line at each question; return all that the terminal showed."""
    shown, answered = b"", 0
    while True:
        try:
            shown += os.read(terminal, 1024)
        except OSError:  # the other side has closed it
            os.close(terminal)
            return shown
        if shown.count(b": ") > answered and shown.endswith(b": "):
            answered += 1
            os.write(terminal, line)
