"""Profiles of the certificates and revocation lists behind a signature: a plant's root and its stations.

References:
    RFC 5280 (2008), X.509 public key infrastructure certificate and CRL profile, doi:10.17487/RFC5280.
    RFC 9336 (2022), X.509 general-purpose extended key usage for document signing, doi:10.17487/RFC9336.
"""

from datetime import datetime, timedelta
from typing import TypeVar

from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.x509.oid import ExtendedKeyUsageOID, ExtensionOID, NameOID

from runner.errors import SigningError

T = TypeVar("T", bound=x509.ExtensionType)
ROOT_YEARS = 15
"""Reports are kept 10 to 15 years (common practice, no source)."""
STATION_YEARS = 2
CRL_DAYS = 90
DOCUMENT_SIGNING = x509.ObjectIdentifier("1.3.6.1.5.5.7.3.36")
"""id-kp-documentSigning, RFC 9336."""
PURPOSES = frozenset({DOCUMENT_SIGNING, ExtendedKeyUsageOID.EMAIL_PROTECTION})
"""One of them is enough; both are written, because some readers know only the second."""
MAX_NAME = 64
"""ub-common-name, RFC 5280 appendix A."""
UNDERSTOOD = frozenset(
    {ExtensionOID.BASIC_CONSTRAINTS, ExtensionOID.KEY_USAGE, ExtensionOID.EXTENDED_KEY_USAGE}
)  # extensions that are looked at; any other that calls itself critical ends in a refusal (RFC 5280, 4.2)


def new_private_key() -> ec.EllipticCurvePrivateKey:
    """Make a key on the curve P-256."""
    return ec.generate_private_key(ec.SECP256R1())


def root_certificate(key: ec.EllipticCurvePrivateKey, name: str, now: datetime) -> x509.Certificate:
    """Return the self-signed certificate of an authority that issues stations and nothing below them.

    Raises:
        SigningError: The name is empty or too long.
    """
    subject = _name(name)
    builder = _builder(subject, subject, key.public_key(), now, ROOT_YEARS)
    return (
        builder.add_extension(x509.BasicConstraints(ca=True, path_length=0), critical=True)
        .add_extension(_key_usage(authority=True), critical=True)
        .sign(key, hashes.SHA256())
    )


def station_certificate(
    public: ec.EllipticCurvePublicKey,
    name: str,
    root: x509.Certificate,
    root_key: ec.EllipticCurvePrivateKey,
    now: datetime,
    crl_url: str | None = None,
) -> x509.Certificate:
    """Return the certificate of a test station.

    Args:
        public: The station's key.
        name: The station's name, as readers show it.
        root: The authority.
        root_key: Its key.
        now: Begin of the two years.
        crl_url: Where the revocation list is published; without one the list is named by its issuer (RFC 5280,
            4.2.1.13), because some verifiers look at no list for a certificate that names none.

    Raises:
        SigningError: The name is empty or too long, or the authority's key and certificate are no pair.
    """
    if root.public_key() != root_key.public_key():
        raise SigningError("the authority's key and certificate do not belong together")
    builder = _builder(_name(name), root.subject, public, now, STATION_YEARS)
    place = x509.UniformResourceIdentifier(crl_url) if crl_url else x509.DirectoryName(root.subject)
    purposes = [DOCUMENT_SIGNING, ExtendedKeyUsageOID.EMAIL_PROTECTION]
    return (
        builder.add_extension(x509.BasicConstraints(ca=False, path_length=None), critical=True)
        .add_extension(_key_usage(authority=False), critical=True)
        .add_extension(x509.ExtendedKeyUsage(purposes), critical=False)
        .add_extension(_authority_identifier(root), critical=False)
        .add_extension(x509.CRLDistributionPoints([x509.DistributionPoint([place], None, None, None)]), critical=False)
        .sign(root_key, hashes.SHA256())
    )


def revocation_list(
    root: x509.Certificate,
    root_key: ec.EllipticCurvePrivateKey,
    now: datetime,
    *,
    earlier: x509.CertificateRevocationList | None = None,
    revoke: x509.Certificate | None = None,
) -> x509.CertificateRevocationList:
    """Return a fresh revocation list: the earlier one's entries and one more, if asked.

    Args:
        root: The authority.
        root_key: Its key.
        now: Time of the list, and of the new entry.
        earlier: The list so far.
        revoke: Certificate that holds no longer.
    """
    number = 1
    builder = x509.CertificateRevocationListBuilder().issuer_name(root.subject).last_update(now)
    builder = builder.next_update(now + timedelta(days=CRL_DAYS))
    listed = set()
    if earlier is not None:
        number += earlier.extensions.get_extension_for_class(x509.CRLNumber).value.crl_number
        for entry in earlier:
            builder = builder.add_revoked_certificate(entry)
            listed.add(entry.serial_number)
    if revoke is not None and revoke.serial_number not in listed:
        entry = x509.RevokedCertificateBuilder().serial_number(revoke.serial_number).revocation_date(now).build()
        builder = builder.add_revoked_certificate(entry)
    builder = builder.add_extension(x509.CRLNumber(number), critical=False)
    return builder.add_extension(_authority_identifier(root), critical=False).sign(root_key, hashes.SHA256())


def usage_fault(certificate: x509.Certificate) -> str | None:
    """Tell what keeps a certificate from signing reports, or None; dates and issuer are not looked at."""
    public = certificate.public_key()
    if not isinstance(public, ec.EllipticCurvePublicKey) or public.curve.name != "secp256r1":
        return "its key is not on the curve P-256"
    try:
        extensions = certificate.extensions
    except ValueError as error:
        return f"its extensions cannot be read: {error}"
    unknown = [e.oid.dotted_string for e in extensions if e.critical and e.oid not in UNDERSTOOD]
    if unknown:
        return f"it carries critical extensions that are not understood: {', '.join(unknown)}"
    basic = _extension(extensions, x509.BasicConstraints)
    if basic is not None and basic.ca:
        return "it is the certificate of an authority, not of a station"
    usage = _extension(extensions, x509.KeyUsage)
    if usage is None or not (usage.digital_signature and usage.content_commitment):
        return "its key usage lacks digital signature or non-repudiation"
    purposes = _extension(extensions, x509.ExtendedKeyUsage)
    if purposes is not None and not PURPOSES & set(purposes):
        return "its extended key usage allows neither document signing nor e-mail protection"
    return None


def authority_fault(certificate: x509.Certificate) -> str | None:
    """Tell what keeps a certificate from being an authority's, or None."""
    try:
        extensions = certificate.extensions
        basic, usage = _extension(extensions, x509.BasicConstraints), _extension(extensions, x509.KeyUsage)
    except ValueError as error:
        return f"its extensions cannot be read: {error}"
    if basic is None or not basic.ca:
        return "it is no authority's certificate"
    if usage is not None and not usage.key_cert_sign:
        return "its key usage does not allow it to issue certificates"
    return None


def common_name(certificate: x509.Certificate) -> str:
    """Return the name that a certificate gives its holder; it proves nothing by itself."""
    names = certificate.subject.get_attributes_for_oid(NameOID.COMMON_NAME)
    return str(names[0].value) if names else certificate.subject.rfc4514_string()


def fingerprint(certificate: x509.Certificate) -> str:
    """Return the SHA-256 of a certificate, for comparing by eye."""
    return f"sha256:{certificate.fingerprint(hashes.SHA256()).hex()}"


def _extension(extensions: x509.Extensions, kind: type[T]) -> T | None:
    try:
        return extensions.get_extension_for_class(kind).value
    except x509.ExtensionNotFound:
        return None


def _name(text: str) -> x509.Name:
    if not text.strip() or len(text.encode()) > MAX_NAME or not text.isprintable():
        raise SigningError(
            f"'{text}' cannot stand in a certificate as a name", allowed=f"1 to {MAX_NAME} bytes of UTF-8"
        )
    return x509.Name([x509.NameAttribute(NameOID.COMMON_NAME, text.strip())])


def _builder(
    subject: x509.Name, issuer: x509.Name, public: ec.EllipticCurvePublicKey, now: datetime, years: int
) -> x509.CertificateBuilder:
    begin = now.replace(microsecond=0)
    return (
        x509.CertificateBuilder()
        .subject_name(subject)
        .issuer_name(issuer)
        .public_key(public)
        .serial_number(x509.random_serial_number())
        .not_valid_before(begin)
        .not_valid_after(begin + timedelta(days=round(365.25 * years)))
        .add_extension(x509.SubjectKeyIdentifier.from_public_key(public), critical=False)
    )


def _authority_identifier(root: x509.Certificate) -> x509.AuthorityKeyIdentifier:
    subject = root.extensions.get_extension_for_class(x509.SubjectKeyIdentifier).value
    return x509.AuthorityKeyIdentifier.from_issuer_subject_key_identifier(subject)


def _key_usage(*, authority: bool) -> x509.KeyUsage:
    return x509.KeyUsage(
        digital_signature=not authority,
        content_commitment=not authority,
        key_encipherment=False,
        data_encipherment=False,
        key_agreement=False,
        key_cert_sign=authority,
        crl_sign=authority,
        encipher_only=False,
        decipher_only=False,
    )
