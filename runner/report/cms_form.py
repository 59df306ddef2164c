"""The one form of this program's signatures: a CMS of which every byte but the signature value is prescribed.

A CMS holds much that its signature does not cover: outer lists of algorithms, certificates, lengths written in other
ways. So reading goes backwards: the few parts that may vary (certificate, time, signature value, time stamp) are taken
out, the whole is built from them again, and only the same bytes are accepted. An ECDSA value (r, s) has a twin
(r, n - s) that is just as valid; only the one with the lower s is written and accepted.

References:
    RFC 5652 (2009), Cryptographic Message Syntax, doi:10.17487/RFC5652.
    RFC 5035 (2007), signing-certificate-v2, doi:10.17487/RFC5035.
    ETSI EN 319 122-1 V1.3.1, CAdES; ETSI EN 319 142-1 V1.2.1, PAdES baseline B-B and B-T.
    ITU-T X.690 (2021), distinguished encoding rules.
    FIPS 186-5 (2023), ECDSA; SEC 1 v2.0 (2009), 4.1.
"""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from hashlib import sha256

from asn1crypto import cms
from asn1crypto import x509 as asn1_x509
from cryptography import x509
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.hazmat.primitives.asymmetric.utils import decode_dss_signature, encode_dss_signature
from cryptography.hazmat.primitives.serialization import Encoding

from runner.errors import VerificationRefused
from runner.report.der import (
    CONTEXT_0,
    CONTEXT_1,
    GENERALIZED_TIME,
    OCTETS,
    SEQUENCE,
    SET,
    UTC_TIME,
    oid,
    small,
    tlv,
)

P256_ORDER = 0xFFFFFFFF00000000FFFFFFFFFFFFFFFFBCE6FAADA7179E84F3B9CAC2FC632551
"""Order n of the curve P-256 (NIST SP 800-186, 3.2.1.3)."""


@dataclass(frozen=True)
class Signature:
    """What one CMS says, once it is known to be in the program's form and true."""

    certificate: x509.Certificate
    """Of the signer; that it can be trusted is another question."""
    time: datetime | None
    """Signing time among the signed attributes; None in a PDF, which states it itself."""
    value: bytes
    """Signature value, DER of (r, s): what a time stamp stamps."""
    time_stamp: bytes | None
    """RFC 3161 token, DER, not looked into yet."""


def sign_digest(
    digest: bytes, private: ec.EllipticCurvePrivateKey, certificate: x509.Certificate, time: datetime | None
) -> bytes:
    """Return the signature value (DER) over the signed attributes of a document's digest.

    Args:
        digest: SHA-256 of what is signed.
        private: P-256 key.
        certificate: Its certificate.
        time: Written among the signed attributes; None where the document states it itself.
    """
    value = private.sign(_to_sign(digest, certificate, time), ec.ECDSA(hashes.SHA256()))
    r, s = decode_dss_signature(value)
    return encode_dss_signature(r, min(s, P256_ORDER - s))


def build(
    digest: bytes, certificate: x509.Certificate, time: datetime | None, value: bytes, time_stamp: bytes | None = None
) -> bytes:
    """Return the CMS (DER, detached) of a signature value.

    Args:
        digest: SHA-256 of what was signed.
        certificate: Of the signer.
        time: As signed.
        value: Signature value.
        time_stamp: RFC 3161 token, DER, over the value.
    """
    return _build(digest, certificate.public_bytes(Encoding.DER), time, value, time_stamp)


def read(der: bytes, digest: bytes, *, timed: bool) -> Signature:
    """Read a CMS that must be in the program's form and hold a true signature of a digest.

    Args:
        der: The bytes, nothing behind them.
        digest: SHA-256 of the bytes that should have been signed.
        timed: The signing time must be among the signed attributes; else it must not.

    Raises:
        VerificationRefused: Another form, another document, or no true signature.
    """
    with refusing("the signature cannot be read"):
        return _read(der, digest, timed=timed)


@contextmanager
def refusing(found: str) -> Iterator[None]:
    """Turn whatever a damaged input raises in a library into a refusal.

    Args:
        found: Begin of the sentence.
    """
    try:
        yield
    except VerificationRefused:
        raise
    except Exception as error:
        raise VerificationRefused(f"{found}: {type(error).__name__}") from error


def _read(der: bytes, digest: bytes, *, timed: bool) -> Signature:
    certificate_der, time, value, stamp, stated = _varying(der, timed=timed)
    if _build(stated, certificate_der, time, value, stamp) != der:
        raise VerificationRefused("the signature holds something that it should not, or is written in another way")
    if stated != digest:
        raise VerificationRefused("it was changed after signing: its digest is not the signed one")
    certificate = x509.load_der_x509_certificate(certificate_der)
    _check_value(digest, certificate, time, value)
    return Signature(certificate, time, value, stamp)


def length(der: bytes) -> int:
    """Return the length in bytes of the DER value that some bytes begin with.

    Raises:
        VerificationRefused: They begin with no DER sequence.
    """
    if len(der) < 4 or der[0] != 0x30:
        raise VerificationRefused("the signature cannot be read: it begins with no sequence")
    first = der[1]
    if first < 0x80:
        return 2 + first
    count = first - 0x80
    if not 1 <= count <= 4:
        raise VerificationRefused("the signature cannot be read: its length is written in another way")
    return 2 + count + int.from_bytes(der[2 : 2 + count], "big")


def _varying(der: bytes, *, timed: bool) -> tuple[bytes, datetime | None, bytes, bytes | None, bytes]:
    content = cms.ContentInfo.load(der, strict=True)
    data = content["content"]
    (signer,) = data["signer_infos"]
    (certificate,) = data["certificates"]
    signed = {attribute["type"].native: attribute["values"] for attribute in signer["signed_attrs"]}
    time = None
    if timed:
        (stated_time,) = signed["signing_time"]
        time = stated_time.native
    (stated,) = signed["message_digest"]
    stamp = None
    if len(signer["unsigned_attrs"] or ()):
        (attribute,) = signer["unsigned_attrs"]
        if attribute["type"].native != "signature_time_stamp_token":
            raise VerificationRefused("the signature carries something unsigned that is no time stamp")
        (token,) = attribute["values"]
        stamp = token.dump()
    return certificate.chosen.dump(), time, signer["signature"].native, stamp, stated.native


def _check_value(digest: bytes, certificate: x509.Certificate, time: datetime | None, value: bytes) -> None:
    public = certificate.public_key()
    if not isinstance(public, ec.EllipticCurvePublicKey) or public.curve.name != "secp256r1":
        raise VerificationRefused("the signer's key is not on the curve P-256")
    r, s = decode_dss_signature(value)
    if encode_dss_signature(r, s) != value or not 0 < s <= P256_ORDER // 2:
        raise VerificationRefused("the signature value is not written in the one allowed way")
    try:
        public.verify(value, _to_sign(digest, certificate, time), ec.ECDSA(hashes.SHA256()))
    except InvalidSignature as error:
        raise VerificationRefused("the signature is not the signer's over these bytes") from error


def _build(
    digest: bytes, certificate_der: bytes, time: datetime | None, value: bytes, time_stamp: bytes | None
) -> bytes:
    to_be_signed = asn1_x509.Certificate.load(certificate_der, strict=True)["tbs_certificate"]
    attributes = _attributes(digest, certificate_der, time)
    signer = [
        _VERSION_1,
        tlv(SEQUENCE, to_be_signed["issuer"].dump(), to_be_signed["serial_number"].dump()),
        _SHA_256,
        tlv(CONTEXT_0, *attributes),
        _ECDSA_WITH_SHA_256,
        tlv(OCTETS, value),
    ]
    if time_stamp is not None:
        signer.append(tlv(CONTEXT_1, _attribute(_TIME_STAMP, time_stamp)))
    data = tlv(
        SEQUENCE,
        _VERSION_1,
        tlv(SET, _SHA_256),
        tlv(SEQUENCE, _DATA),
        tlv(CONTEXT_0, certificate_der),
        tlv(SET, tlv(SEQUENCE, *signer)),
    )
    return tlv(SEQUENCE, _SIGNED_DATA, tlv(CONTEXT_0, data))


def _to_sign(digest: bytes, certificate: x509.Certificate, time: datetime | None) -> bytes:
    """Return the bytes under the signature value: the attributes as a plain set (RFC 5652, 5.4)."""
    return tlv(SET, *_attributes(digest, certificate.public_bytes(Encoding.DER), time))


def _attributes(digest: bytes, certificate_der: bytes, time: datetime | None) -> list[bytes]:
    # ESSCertIDv2 with its default algorithm, SHA-256, binds every byte of the certificate to the signature
    bound = tlv(SEQUENCE, tlv(OCTETS, sha256(certificate_der).digest()))
    attributes = [
        _attribute(_CONTENT_TYPE, _DATA),
        _attribute(_MESSAGE_DIGEST, tlv(OCTETS, digest)),
        _attribute(_SIGNING_CERTIFICATE, tlv(SEQUENCE, tlv(SEQUENCE, bound))),
    ]
    if time is not None:
        attributes.append(_attribute(_SIGNING_TIME, _time(time)))
    return sorted(attributes)  # DER writes a set in ascending order (X.690, 11.6)


def _attribute(kind: bytes, value: bytes) -> bytes:
    return tlv(SEQUENCE, kind, tlv(SET, value))


def _time(time: datetime) -> bytes:
    """Return a time as RFC 5652, 11.3 wants it: two-digit years until 2049."""
    moment = time.astimezone(UTC)
    if 1950 <= moment.year < 2050:
        return tlv(UTC_TIME, moment.strftime("%y%m%d%H%M%SZ").encode())
    return tlv(GENERALIZED_TIME, moment.strftime("%Y%m%d%H%M%SZ").encode())


_VERSION_1 = small(1)
_DATA = oid("1.2.840.113549.1.7.1")
_SIGNED_DATA = oid("1.2.840.113549.1.7.2")
_CONTENT_TYPE = oid("1.2.840.113549.1.9.3")
_MESSAGE_DIGEST = oid("1.2.840.113549.1.9.4")
_SIGNING_TIME = oid("1.2.840.113549.1.9.5")
_TIME_STAMP = oid("1.2.840.113549.1.9.16.2.14")
_SIGNING_CERTIFICATE = oid("1.2.840.113549.1.9.16.2.47")
_SHA_256 = tlv(SEQUENCE, oid("2.16.840.1.101.3.4.2.1"))
_ECDSA_WITH_SHA_256 = tlv(SEQUENCE, oid("1.2.840.10045.4.3.2"))
