"""Time stamps are asked for by RFC 3161, cut down to what is signed, and read strictly."""

import subprocess
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import pytest
from asn1crypto import cms, core
from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.x509.oid import ExtendedKeyUsageOID

from runner.errors import SigningError, VerificationRefused
from runner.report import time_stamp
from runner.report.certificates import new_private_key
from tests.report import stamp_server

VALUE = b"a signature value"


@pytest.fixture(scope="module", params=["ec", "rsa"])
def stamped(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> tuple[bytes, Path]:
    """A token of a server with a key of each kind, and the server's folder."""
    folder = tmp_path_factory.mktemp("server")
    stamp_server.make(folder, algorithm=request.param)
    with stamp_server.serving(folder) as url:
        return time_stamp.request(url, VALUE), folder


def test_a_server_is_asked_and_its_answer_read(stamped: tuple[bytes, Path]) -> None:
    """The token tells the server's time and certificate."""
    found = time_stamp.read(stamped[0], VALUE)

    assert abs(found.time - datetime.now(UTC)) < timedelta(minutes=5)
    assert found.certificate.subject.rfc4514_string() == "CN=Time server"


def test_openssl_verifies_the_token(stamped: tuple[bytes, Path]) -> None:
    """`openssl ts` accepts what is kept of the answer."""
    token, folder = stamped
    (folder / "token").write_bytes(token)
    (folder / "value").write_bytes(VALUE)

    order = ["openssl", "ts", "-verify", "-token_in", "-in", "token", "-data", "value", "-CAfile", "root.pem"]
    done = subprocess.run(order, cwd=folder, capture_output=True, check=False)

    assert done.returncode == 0, done.stderr


def test_every_bit_of_a_token_counts(stamped: tuple[bytes, Path]) -> None:
    """Each single bit flipped in turn: none is accepted."""
    token = stamped[0]
    accepted = []

    for bit in range(8 * len(token)):
        flipped = bytearray(token)
        flipped[bit // 8] ^= 1 << bit % 8
        try:
            time_stamp.read(bytes(flipped), VALUE)
        except VerificationRefused:
            continue
        accepted.append(bit)

    assert accepted == []


def test_only_the_servers_certificate_is_kept(stamped: tuple[bytes, Path]) -> None:
    """The server sent its root along; nothing signs that list, so it is cut."""
    data = cms.ContentInfo.load(stamped[0])["content"]

    assert len(data["certificates"]) == 1


def test_a_stamp_over_something_else_is_refused(stamped: tuple[bytes, Path]) -> None:
    """A true token of another signature proves nothing about this one."""
    with pytest.raises(VerificationRefused, match="over another signature"):
        time_stamp.read(stamped[0], VALUE + b"!")


def _edited(token: bytes, change: Callable[[Any, Any], None]) -> bytes:
    content = cms.ContentInfo.load(token)
    change(content["content"], content["content"]["signer_infos"][0])
    edited: bytes = content.dump(force=True)
    return edited


def _add_attribute(_data: Any, signer: Any) -> None:
    signer["unsigned_attrs"] = [{"type": "1.3.6.1.4.1.99999.1", "values": [core.Integer(1)]}]


def _outer_digest(data: Any, _signer: Any) -> None:
    data["digest_algorithms"] = [{"algorithm": "sha512"}]


def _drop_certificate(data: Any, _signer: Any) -> None:
    data["certificates"] = []


@pytest.mark.parametrize("change", [_add_attribute, _outer_digest, _drop_certificate])
def test_unsigned_parts_of_a_token_may_not_differ(
    stamped: tuple[bytes, Path], change: Callable[[Any, Any], None]
) -> None:
    """What the server did not sign is prescribed."""
    with pytest.raises(VerificationRefused, match="the time stamp"):
        time_stamp.read(_edited(stamped[0], change), VALUE)


def test_a_server_that_is_down_is_told() -> None:
    """Nothing listens there: the message names the address and the way out."""
    with pytest.raises(SigningError, match=r"http://127\.0\.0\.1:9/: the time-stamp server did not serve.*without"):
        time_stamp.request("http://127.0.0.1:9/", VALUE)


def test_an_answer_that_is_no_stamp_is_told(tmp_path: Path) -> None:
    """A web page in place of a stamp ends in a sentence."""
    stamp_server.make(tmp_path)

    with stamp_server.serving(tmp_path, broken=True) as url, pytest.raises(SigningError, match="did not serve"):
        time_stamp.request(url, VALUE)


@pytest.mark.parametrize("url", ["file:///etc/hostname", "ftp://example.org/", "time.example.org"])
def test_only_web_addresses_are_servers(url: str) -> None:
    """A file is no server."""
    with pytest.raises(SigningError, match="is no time-stamp server"):
        time_stamp.request(url, VALUE)


def test_a_certificate_for_something_else_makes_no_stamps(tmp_path: Path) -> None:
    """Without the critical purpose "time stamping" and nothing else, a signer is no server (RFC 3161, 2.3)."""
    purpose = ExtendedKeyUsageOID.TIME_STAMPING
    both = x509.ExtendedKeyUsage([purpose, ExtendedKeyUsageOID.CODE_SIGNING])
    stamp_server.make(tmp_path)
    with stamp_server.serving(tmp_path) as url:
        token = time_stamp.request(url, VALUE)
    certificate = time_stamp.read(token, VALUE).certificate
    other = _with_purposes(certificate, both)

    with pytest.raises(VerificationRefused, match="no time-stamp server"):
        time_stamp._check_purpose(other)


def _with_purposes(like: Any, purposes: Any) -> Any:
    key = new_private_key()
    builder = x509.CertificateBuilder().subject_name(like.subject).issuer_name(like.issuer).serial_number(1)
    builder = builder.public_key(like.public_key()).not_valid_before(like.not_valid_before_utc)
    builder = builder.not_valid_after(like.not_valid_after_utc).add_extension(purposes, critical=True)
    return builder.sign(key, hashes.SHA256())
