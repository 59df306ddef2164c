"""Certificates and revocation lists have the profile that readers and RFC 5280 want."""

from datetime import timedelta
from typing import Any

import pytest
from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.x509.oid import ExtendedKeyUsageOID

from runner.errors import SigningError
from runner.report import certificates as profiles
from runner.report.keys import issued_by
from tests.report import attacks
from tests.report import signed_world as world


def _value(certificate: x509.Certificate, kind: type[x509.ExtensionType]) -> tuple[Any, bool]:
    found = certificate.extensions.get_extension_for_class(kind)
    return found.value, found.critical


def test_a_root_issues_stations_and_nothing_below() -> None:
    """CA with path length 0, key usage certificates and lists only, 15 years (RFC 5280, 4.2.1.3 and 4.2.1.9)."""
    root = world.authority().root

    basic, basic_critical = _value(root, x509.BasicConstraints)
    usage, usage_critical = _value(root, x509.KeyUsage)

    assert basic_critical
    assert usage_critical
    assert (basic.ca, basic.path_length) == (True, 0)
    assert (usage.key_cert_sign, usage.crl_sign, usage.digital_signature) == (True, True, False)
    assert root.not_valid_after_utc - root.not_valid_before_utc == timedelta(days=5479)
    assert profiles.authority_fault(root) is None


def test_a_station_signs_documents_and_nothing_else() -> None:
    """No CA, digital signature and non-repudiation, both purposes (RFC 9336; e-mail for older readers), 2 years."""
    made = world.authority()
    certificate = made.station.certificate

    usage, usage_critical = _value(certificate, x509.KeyUsage)
    purposes, purposes_critical = _value(certificate, x509.ExtendedKeyUsage)

    assert usage_critical
    assert not purposes_critical
    assert (usage.digital_signature, usage.content_commitment, usage.key_cert_sign) == (True, True, False)
    assert {p.dotted_string for p in purposes} == {
        "1.3.6.1.5.5.7.3.36",
        ExtendedKeyUsageOID.EMAIL_PROTECTION.dotted_string,
    }
    assert certificate.not_valid_after_utc - certificate.not_valid_before_utc == timedelta(days=730)
    assert profiles.usage_fault(certificate) is None
    assert issued_by(certificate, made.root)


def test_a_station_always_says_where_revocations_are_listed() -> None:
    """Some verifiers look at no list for a certificate that names none: the issuer's name stands in for an address."""
    made = world.authority()
    key = profiles.new_private_key().public_key()
    url = "http://crl.example/root.crl"
    with_url = profiles.station_certificate(key, "Bench", made.root, made.root_key, world.MADE, url)

    plain, _ = _value(made.station.certificate, x509.CRLDistributionPoints)
    addressed, _ = _value(with_url, x509.CRLDistributionPoints)

    assert plain[0].full_name[0].value == made.root.subject
    assert addressed[0].full_name[0].value == url


def test_an_authority_and_a_key_must_belong_together() -> None:
    """A certificate signed by a key that is not its issuer's could never be trusted."""
    one, other = world.authority(), world.authority()

    with pytest.raises(SigningError, match="do not belong together"):
        profiles.station_certificate(one.station.private.public_key(), "Bench", one.root, other.root_key, world.MADE)


@pytest.mark.parametrize("name", ["", "  ", "x" * 65, "two\nlines"])
def test_a_name_must_be_one_line_of_64_characters(name: str) -> None:
    """ub-common-name is 64 (RFC 5280, appendix A)."""
    with pytest.raises(SigningError, match="cannot stand in a certificate"):
        profiles.root_certificate(profiles.new_private_key(), name, world.MADE)


def test_a_revocation_list_keeps_its_entries_and_counts_up() -> None:
    """Each list has the entries of the one before, a higher number, and one entry per certificate."""
    made = world.authority()
    first = profiles.revocation_list(made.root, made.root_key, world.MADE)
    second = profiles.revocation_list(
        made.root, made.root_key, world.SIGNED, earlier=first, revoke=made.station.certificate
    )
    third = profiles.revocation_list(
        made.root, made.root_key, world.NOW, earlier=second, revoke=made.station.certificate
    )

    numbers = [c.extensions.get_extension_for_class(x509.CRLNumber).value.crl_number for c in (first, second, third)]
    entry = third.get_revoked_certificate_by_serial_number(made.station.certificate.serial_number)

    assert numbers == [1, 2, 3]
    assert (len(first), len(second), len(third)) == (0, 1, 1)
    assert entry is not None
    assert entry.revocation_date_utc == world.SIGNED
    assert third.is_signature_valid(made.root.public_key())  # type: ignore[arg-type]


def test_what_cannot_sign_reports_is_told() -> None:
    """Each fault of a certificate has its own words."""
    made = world.authority()
    server = ExtendedKeyUsageOID.SERVER_AUTH

    faults = [
        profiles.usage_fault(made.root),
        profiles.usage_fault(attacks.strange_certificate(made, usage=False).certificate),
        profiles.usage_fault(attacks.strange_certificate(made, purpose=server).certificate),
        profiles.usage_fault(attacks.strange_certificate(made, critical=True).certificate),
        profiles.usage_fault(_on_another_curve(made)),
        profiles.usage_fault(attacks.strange_certificate(made).certificate),
    ]

    assert faults[0] == "it is the certificate of an authority, not of a station"
    assert "lacks digital signature or non-repudiation" in str(faults[1])
    assert "neither document signing nor e-mail protection" in str(faults[2])
    assert "1.3.6.1.4.1.99999.2" in str(faults[3])
    assert "not on the curve P-256" in str(faults[4])
    assert faults[5] is None


def test_only_an_authority_is_one() -> None:
    """A station's certificate cannot stand in for a root."""
    made = world.authority()

    assert profiles.authority_fault(made.station.certificate) == "it is no authority's certificate"


def test_fingerprint_and_name_identify_a_certificate() -> None:
    """The mark is the SHA-256 that other tools print, too."""
    certificate = world.authority().station.certificate

    assert profiles.common_name(certificate) == "Bench 2"
    assert profiles.fingerprint(certificate) == "sha256:" + certificate.fingerprint(hashes.SHA256()).hex()


def _on_another_curve(made: world.Authority) -> x509.Certificate:
    key = ec.generate_private_key(ec.SECP384R1())
    return (
        x509.CertificateBuilder()
        .subject_name(made.root.subject)
        .issuer_name(made.root.subject)
        .public_key(key.public_key())
        .serial_number(1)
        .not_valid_before(world.MADE)
        .not_valid_after(world.NOW)
        .sign(made.root_key, hashes.SHA256())
    )
