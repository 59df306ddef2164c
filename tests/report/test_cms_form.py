"""A CMS is accepted only in the one form that this program writes; other tools accept it, too."""

import subprocess
from datetime import UTC, datetime
from hashlib import sha256
from pathlib import Path

import pytest
from asn1crypto import cms
from cryptography.hazmat.primitives.asymmetric.utils import decode_dss_signature
from cryptography.hazmat.primitives.serialization import Encoding

from runner.errors import VerificationRefused
from runner.report import cms_form
from tests.report import attacks_cms
from tests.report import signed_world as world

DATA = b"<p>lower left corner: 0.187 cy/px</p>\n"
DIGEST = sha256(DATA).digest()
AUTHORITY = world.authority()


def _made(time: datetime | None = world.SIGNED) -> bytes:
    key = AUTHORITY.station
    value = cms_form.sign_digest(DIGEST, key.private, key.certificate, time)
    return cms_form.build(DIGEST, key.certificate, time, value)


def test_what_is_written_is_read_back() -> None:
    """Signer and time come back out."""
    found = cms_form.read(_made(), DIGEST, timed=True)

    assert (found.certificate, found.time, found.time_stamp) == (AUTHORITY.station.certificate, world.SIGNED, None)


def test_openssl_verifies_it(tmp_path: Path) -> None:
    """`openssl cms` accepts it given the root, signing-certificate attribute included (RFC 5035)."""
    (tmp_path / "data").write_bytes(DATA)
    (tmp_path / "p7s").write_bytes(_made())
    (tmp_path / "root.pem").write_bytes(AUTHORITY.root.public_bytes(Encoding.PEM))

    order = ["openssl", "cms", "-verify", "-cades", "-binary", "-inform", "DER", "-in", "p7s", "-content", "data"]
    date = ["-attime", str(int(world.SIGNED.timestamp()))]
    done = subprocess.run([*order, "-CAfile", "root.pem", *date], cwd=tmp_path, capture_output=True, check=False)

    assert done.returncode == 0, done.stderr
    assert done.stdout == DATA


def test_another_library_reads_the_same_bytes() -> None:
    """An ASN.1 library of its own writes the same bytes again: the form is DER."""
    der = _made()
    content = cms.ContentInfo.load(der, strict=True)

    assert content["content"]["signer_infos"][0]["signature_algorithm"].signature_algo == "ecdsa"
    assert content.copy().dump(force=True) == der


def test_every_bit_of_a_detached_signature_counts() -> None:
    """Each single bit flipped in turn: none is accepted."""
    der = _made()
    accepted = []

    for bit in range(8 * len(der)):
        flipped = bytearray(der)
        flipped[bit // 8] ^= 1 << bit % 8
        try:
            cms_form.read(bytes(flipped), DIGEST, timed=True)
        except VerificationRefused:
            continue
        accepted.append(bit)

    assert accepted == []


@pytest.mark.parametrize("change", attacks_cms.CMS, ids=lambda change: str(change.__name__))
def test_unsigned_parts_may_not_differ(change: attacks_cms.CmsAttack) -> None:
    """What the signature does not cover is prescribed to the byte."""
    with pytest.raises(VerificationRefused, match="the signature"):
        cms_form.read(change(_made(), AUTHORITY), DIGEST, timed=True)


def test_the_twin_of_a_signature_value_is_true_but_refused() -> None:
    """(r, n - s) satisfies ECDSA as well (SEC 1, 4.1.4); only the lower s is written and accepted."""
    der = _made()
    (signer,) = cms.ContentInfo.load(der)["content"]["signer_infos"]
    (other,) = cms.ContentInfo.load(attacks_cms.twin_value(der, AUTHORITY))["content"]["signer_infos"]

    r, s = decode_dss_signature(signer["signature"].native)
    assert decode_dss_signature(other["signature"].native) == (r, cms_form.P256_ORDER - s)
    assert s <= cms_form.P256_ORDER // 2
    with pytest.raises(VerificationRefused, match="not written in the one allowed way"):
        cms_form.read(attacks_cms.twin_value(der, AUTHORITY), DIGEST, timed=True)


def test_the_low_value_is_written_every_time() -> None:
    """Half of all fresh values have the higher s: 40 signatures without one would come by luck once in 10^12."""
    key = AUTHORITY.station
    values = [cms_form.sign_digest(DIGEST, key.private, key.certificate, None) for _ in range(40)]

    assert all(decode_dss_signature(value)[1] <= cms_form.P256_ORDER // 2 for value in values)


def test_the_order_of_the_curve_is_the_published_one() -> None:
    """The order n of P-256 as in NIST SP 800-186, 3.2.1.3, in decimal."""
    published = 115792089210356248762697446949407573529996955224135760342422259061068512044369

    assert published == cms_form.P256_ORDER


def test_other_bytes_are_told_from_a_broken_signature() -> None:
    """A true signature over something else says that the document was changed."""
    with pytest.raises(VerificationRefused, match="it was changed after signing"):
        cms_form.read(_made(), sha256(DATA + b" ").digest(), timed=True)


def test_another_signers_certificate_is_refused() -> None:
    """The value must be the certificate's own key's."""
    other = world.authority().station
    value = cms_form.sign_digest(DIGEST, other.private, AUTHORITY.station.certificate, world.SIGNED)

    with pytest.raises(VerificationRefused, match="not the signer's over these bytes"):
        cms_form.read(cms_form.build(DIGEST, AUTHORITY.station.certificate, world.SIGNED, value), DIGEST, timed=True)


@pytest.mark.parametrize("timed", [True, False])
def test_the_time_stands_where_it_belongs(timed: bool) -> None:
    """In a PDF the time stands in the file (PAdES forbids it in the CMS), elsewhere in the CMS."""
    with pytest.raises(VerificationRefused, match="the signature"):
        cms_form.read(_made(None if timed else world.SIGNED), DIGEST, timed=timed)


@pytest.mark.parametrize(("year", "tag"), [(2049, 23), (2050, 24)])
def test_years_from_2050_have_four_digits(year: int, tag: int) -> None:
    """UTCTime until 2049, GeneralizedTime from 2050 on (RFC 5652, 11.3)."""
    time = datetime(year, 6, 1, tzinfo=UTC)

    signed = cms.ContentInfo.load(_made(time))["content"]["signer_infos"][0]["signed_attrs"]
    (stated,) = [a["values"][0] for a in signed if a["type"].native == "signing_time"]

    assert stated.chosen.tag == tag
    assert cms_form.read(_made(time), DIGEST, timed=True).time == time


@pytest.mark.parametrize("data", [b"", b"\x30", b"\x30\x80\0\0", b"<html>", b"\x31\x01\x00\x00"])
def test_lengths_of_other_things_are_refused(data: bytes) -> None:
    """Only a definite DER sequence has a length here."""
    with pytest.raises(VerificationRefused, match="the signature cannot be read"):
        cms_form.length(data)
