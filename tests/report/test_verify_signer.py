"""Who signed and when: chain, usages, dates, time stamp and revocation, each judged at the signing time.

References:
    RFC 5280 (2008), 4.2 (critical extensions), 5 (revocation lists), 6.1 (path validation).
"""

from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from hashlib import sha256
from typing import Any

import pytest
from cryptography import x509
from cryptography.hazmat.primitives.hashes import SHA256
from cryptography.x509.oid import ExtendedKeyUsageOID

from runner.errors import UsageError
from runner.report import certificates as profiles
from runner.report import cms_form, sign, verify, verify_signer
from runner.report.cms_form import Signature
from runner.report.keys import StationKey
from runner.report.verify_record import CRL, STAMP, UNKNOWN_SIGNER, Check, Terms
from tests.report import attacks, stamp_server
from tests.report import signed_world as world

AUTHORITY = world.authority()
PAGE = b"page"
DAY = timedelta(days=1)


def _signature(key: StationKey) -> Signature:
    """Sign without the checks of signing, as an attacker would."""
    digest = sha256(PAGE).digest()
    value = cms_form.sign_digest(digest, key.private, key.certificate, world.SIGNED)
    return cms_form.read(cms_form.build(digest, key.certificate, world.SIGNED, value), digest, timed=True)


def _terms(*crl: x509.CertificateRevocationList, roots: Sequence[x509.Certificate] | None = None) -> Terms:
    given = [AUTHORITY.root] if roots is None else roots
    return verify.terms_of(roots=given, crl=crl, now=world.NOW, tools=world.TOOLS)


def _checks(key: StationKey, terms: Terms, claimed: datetime = world.SIGNED) -> dict[str, Check]:
    return {check.name: check for check in verify_signer.check_signer(_signature(key), claimed, terms)}


def test_a_station_of_a_trusted_authority_holds() -> None:
    """Signer and authority are named."""
    checks = _checks(AUTHORITY.station, _terms())

    assert [check.held for check in checks.values()] == [True, True]
    assert checks["signer"].sentence == "signed by 'Bench 2', for whom 'Walnut Works test authority' vouches"


def test_without_a_root_the_digest_is_told_in_groups() -> None:
    """What two people compare are the first 64 bits of the certificate's SHA-256, in groups of four digits."""
    found = _checks(AUTHORITY.station, _terms(roots=[]))["signer"]
    digits = AUTHORITY.station.certificate.fingerprint(SHA256()).hex()

    assert (found.held, found.accept) == (None, UNKNOWN_SIGNER)
    assert f"({digits[:4]} {digits[4:8]} {digits[8:12]} {digits[12:16]} …)" in found.sentence
    assert digits[16:20] not in found.sentence


@pytest.mark.parametrize(
    ("key", "words"),
    [
        (attacks.look_alike(), "none of the given authorities issued"),
        (attacks.issued_by_station(AUTHORITY), "none of the given authorities issued"),
        (StationKey(AUTHORITY.root_key, AUTHORITY.root), "the certificate of an authority, not of a station"),
        (attacks.strange_certificate(AUTHORITY, usage=False), "lacks digital signature or non-repudiation"),
        (attacks.strange_certificate(AUTHORITY, purpose=ExtendedKeyUsageOID.CODE_SIGNING), "extended key usage"),
        (attacks.strange_certificate(AUTHORITY, critical=True), "critical extensions that are not understood"),
        (attacks.strange_certificate(AUTHORITY, begin=world.SIGNED + DAY), "it was valid from"),
        (attacks.strange_certificate(AUTHORITY, begin=world.SIGNED - 6 * DAY), "it was valid from"),
    ],
)
def test_whoever_is_no_station_of_the_authority_is_refused(key: StationKey, words: str) -> None:
    """A look-alike, a station's own station, an authority, other usages, other dates."""
    found = _checks(key, _terms())["signer"]

    assert found.held is False
    assert words in found.sentence


def test_of_two_roots_the_right_one_vouches() -> None:
    """Another authority of the same name beside the true one changes nothing."""
    other = world.authority().root

    assert _checks(AUTHORITY.station, _terms(roots=[other, AUTHORITY.root]))["signer"].held is True
    assert _checks(AUTHORITY.station, _terms(roots=[other]))["signer"].held is False


def test_a_report_outlives_its_certificate() -> None:
    """Judged at the signing time: years after the certificate's end the report still holds."""
    later = replace(_terms(), now=world.NOW + 3650 * DAY)

    assert all(check.held for check in _checks(AUTHORITY.station, later).values())


def test_a_time_in_the_future_is_refused() -> None:
    """Five minutes are granted to clocks, not more."""
    inside, beyond = (world.NOW + timedelta(minutes=m) for m in (4, 6))

    assert _checks(AUTHORITY.station, _terms(), inside)["time"].held is True
    found = _checks(AUTHORITY.station, _terms(), beyond)["time"]
    assert found.held is False
    assert "lies in the future" in found.sentence


# ---- revocation


def _crl(revoke: Any = None, now: datetime = world.NOW - DAY, by: world.Authority = AUTHORITY) -> Any:
    return profiles.revocation_list(by.root, by.root_key, now, revoke=revoke)


def test_a_fresh_list_without_the_certificate_holds() -> None:
    """Not revoked; the day of the list is told."""
    found = _checks(AUTHORITY.station, _terms(_crl()))["revocation"]

    assert (found.held, found.sentence) == (True, "not revoked by the list of 2026-04-30")


def test_revoked_without_a_time_stamp_is_refused_whenever_it_was() -> None:
    """A thief can claim any time; only a stamp shows that a report is older than the theft."""
    certificate = AUTHORITY.station.certificate
    for day in (world.SIGNED - DAY, world.SIGNED + DAY):
        found = _checks(AUTHORITY.station, _terms(_crl(certificate, day)))["revocation"]
        assert found.held is False
        assert "no time stamp proves" in found.sentence


def test_a_newer_list_overrules_an_older_one() -> None:
    """In whatever order they are given."""
    old, new = _crl(now=world.NOW - 5 * DAY), _crl(AUTHORITY.station.certificate)

    for lists in ((old, new), (new, old)):
        assert _checks(AUTHORITY.station, _terms(*lists))["revocation"].held is False


@pytest.mark.parametrize(
    ("crl", "held", "words"),
    [
        (_crl(now=world.NOW - 100 * DAY), None, "which is out of date"),
        (_crl(by=world.authority("Another")), None, "none of the given revocation lists"),
        (_crl(by=world.authority()), False, "not the authority's"),
        (_crl(now=world.NOW + DAY), False, "dated in the future"),
    ],
    ids=["old", "another's", "a look-alike's", "future"],
)
def test_a_list_that_proves_nothing(crl: Any, held: bool | None, words: str) -> None:
    """Lists that are old or another authority's leave it open; forged ones refuse."""
    found = _checks(AUTHORITY.station, _terms(crl))["revocation"]

    assert found.held is held
    assert words in found.sentence
    assert held is False or found.accept == CRL


# ---- time stamp


@pytest.fixture(scope="module")
def stamped(tmp_path_factory: pytest.TempPathFactory) -> tuple[world.Authority, Signature, x509.Certificate, datetime]:
    """A signature with a time stamp made now: its authority, the stamp's authority, and the claimed time."""
    folder = tmp_path_factory.mktemp("server")
    stamps, now = stamp_server.make(folder), datetime.now(UTC).replace(microsecond=0)
    made = world.authority(made=now - 30 * DAY)
    with stamp_server.serving(folder) as url:
        der = sign.sign_detached(PAGE, made.station, time=now, timestamp_url=url)
    return made, cms_form.read(der, sha256(PAGE).digest(), timed=True), stamps, now


def _stamped_checks(stamped: Any, claimed: datetime, *crl: Any, vouched: bool = True) -> dict[str, Check]:
    made, signature, stamps, now = stamped
    roots = [made.root, *([stamps] if vouched else [])]
    terms = verify.terms_of(roots=roots, crl=crl, now=now + timedelta(minutes=1), tools=world.TOOLS)
    return {check.name: check for check in verify_signer.check_signer(signature, claimed, terms)}


def test_a_stamp_by_a_trusted_server_counts(stamped: Any) -> None:
    """The server is named, and nothing is said to be only claimed."""
    checks = _stamped_checks(stamped, stamped[3])

    assert all(check.held for check in checks.values())
    assert "by 'Time server'" in checks["time stamp"].sentence
    assert "time" not in checks


def test_a_stamp_by_an_unknown_server_is_told(stamped: Any) -> None:
    """Then the claimed time counts, and the reader knows."""
    found = _stamped_checks(stamped, stamped[3], vouched=False)["time stamp"]

    assert (found.held, found.accept) == (None, STAMP)


@pytest.mark.parametrize("minutes", [10, 100])
def test_a_stamp_older_than_the_claimed_time_is_refused(stamped: Any, minutes: int) -> None:
    """A signature cannot be stamped before it is made."""
    found = _stamped_checks(stamped, stamped[3] + timedelta(minutes=minutes))["time stamp"]

    assert found.held is False
    assert "contradict" in found.sentence


def test_a_stamp_saves_what_was_signed_before_the_theft(stamped: Any) -> None:
    """Revoked after the stamp: holds; revoked before it: refused; with an unknown server: refused."""
    made, _signature, _stamps, now = stamped
    after, before = (_crl(made.station.certificate, now + d, made) for d in (timedelta(seconds=30), -DAY))

    assert _stamped_checks(stamped, now, after)["revocation"].held is True
    assert _stamped_checks(stamped, now, before)["revocation"].held is False
    assert _stamped_checks(stamped, now, after, vouched=False)["revocation"].held is False


def test_a_stamp_of_another_signature_is_refused(stamped: Any) -> None:
    """A true stamp moved to another signature proves nothing."""
    made, signature, stamps, now = stamped
    moved = replace(_signature(made.station), time_stamp=signature.time_stamp)

    found = _stamped_checks((made, moved, stamps, now), now)["time stamp"]

    assert found.held is False
    assert "another signature" in found.sentence


def test_roots_must_be_authorities() -> None:
    """A station's certificate given as a root would vouch for nobody, or for anybody."""
    with pytest.raises(UsageError, match=r"'Bench 2' cannot be trusted as a root: it is no authority's certificate"):
        _terms(roots=[AUTHORITY.station.certificate])
