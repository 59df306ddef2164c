"""RFC 3161 time stamps over a signature value: asking a server, and reading what it answered.

A token is a CMS of its own, with parts that its signature does not cover. Before it is kept it is cut down to the
server's own certificate, which the signature binds; reading accepts nothing else.

References:
    RFC 3161 (2001), Time-Stamp Protocol, doi:10.17487/RFC3161; RFC 5816 (2010), doi:10.17487/RFC5816.
    RFC 5754 (2010), SHA-2 in Cryptographic Message Syntax, doi:10.17487/RFC5754.
"""

import urllib.error
import urllib.request
from dataclasses import dataclass
from datetime import datetime
from hashlib import sha1, sha256
from typing import Any

from asn1crypto import cms, tsp
from asn1crypto import x509 as asn1_x509
from cryptography import x509
from cryptography.exceptions import InvalidSignature
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec, padding, rsa
from cryptography.hazmat.primitives.asymmetric.utils import decode_dss_signature, encode_dss_signature
from cryptography.x509.oid import ExtendedKeyUsageOID

from runner.errors import SigningError, VerificationRefused
from runner.report.cms_form import refusing
from runner.report.der import CONTEXT_0, NULL, OCTETS, SEQUENCE, SET, oid, small, tlv

TIMEOUT_S = 15
MAX_ANSWER = 1_000_000
"""Bytes; a token has a few thousand."""
HASHES: dict[str, type[hashes.HashAlgorithm]] = {
    "sha256": hashes.SHA256,
    "sha384": hashes.SHA384,
    "sha512": hashes.SHA512,
}
"""Digests that a server may use; nothing weaker."""
_SIGNED_DATA, _INFO = oid("1.2.840.113549.1.7.2"), oid("1.2.840.113549.1.9.16.1.4")
_DIGESTS = {name: tlv(SEQUENCE, oid(f"2.16.840.1.101.3.4.2.{n}")) for n, name in enumerate(HASHES, 1)}
_SIGNATURES = {
    **{("ecdsa", name): tlv(SEQUENCE, oid(f"1.2.840.10045.4.3.{n}")) for n, name in enumerate(HASHES, 2)},
    **{
        ("rsassa_pkcs1v15", name): tlv(SEQUENCE, oid(f"1.2.840.113549.1.1.{n}"), NULL)
        for n, name in enumerate(HASHES, 11)
    },
}
"""Algorithms as RFC 5754 writes them (2, 3.2, 3.3)."""


@dataclass(frozen=True)
class TimeStamp:
    """What a token says, once its own signature is known to be true."""

    time: datetime
    """When the server saw the signature value."""
    certificate: x509.Certificate
    """The server's; that it can be trusted is another question."""


def request(url: str, value: bytes) -> bytes:
    """Have a signature value stamped by a server; return the token, DER.

    Args:
        url: http or https address of the server.
        value: Signature value.

    Raises:
        SigningError: No answer, a refusal, or an answer that does not hold.
    """
    if not url.startswith(("http://", "https://")):
        raise SigningError(f"'{url}' is no time-stamp server", allowed="an http or https address")
    from pyhanko.sign.timestamps import TimeStamper, TimestampRequestError  # noqa: PLC0415 - heavy
    from pyhanko.sign.timestamps.common_utils import handle_tsp_response  # noqa: PLC0415

    stamper: Any = TimeStamper
    nonce, query = stamper().request_cms(sha256(value).digest(), "sha256")
    try:
        answer = tsp.TimeStampResp.load(_post(url, query.dump()), strict=True)
        token = _cut_down(handle_tsp_response(answer, nonce))
        read(token, value)
    except (OSError, TimestampRequestError, VerificationRefused, ValueError, TypeError, KeyError) as error:
        reason = getattr(error, "reason", None) or error
        step = "try again, or sign without --timestamp"
        raise SigningError(f"the time-stamp server did not serve: {reason}", where=url, next_step=step) from error
    return token


def read(token: bytes, value: bytes) -> TimeStamp:
    """Read a token that must be the true stamp of a signature value and hold nothing that is not signed.

    Raises:
        VerificationRefused: It is not.
    """
    with refusing("the time stamp cannot be read"):
        return _read(token, value)


def _post(url: str, query: bytes) -> bytes:
    headers = {"Content-Type": "application/timestamp-query", "Accept": "application/timestamp-reply"}
    asking = urllib.request.Request(url, query, headers)  # noqa: S310 - the scheme is checked above
    with urllib.request.urlopen(asking, timeout=TIMEOUT_S) as answer:  # noqa: S310
        data: bytes = answer.read(MAX_ANSWER)
    return data


def _cut_down(token: Any) -> bytes:
    """Write a token anew with nothing in it but what is signed, and the certificate that the signature binds."""
    data = token["content"]
    (signer,) = data["signer_infos"]
    (certificate,) = (c.chosen.dump() for c in data["certificates"] or () if _is_signer(c.chosen, signer["sid"]))
    return _build(data, signer, certificate)


def _is_signer(certificate: Any, sid: Any) -> bool:
    stated = sid.chosen
    return bool(
        sid.name == "issuer_and_serial_number"
        and certificate["tbs_certificate"]["serial_number"].native == stated["serial_number"].native
        and certificate.issuer.dump() == stated["issuer"].dump()
    )


def _build(data: Any, signer: Any, certificate_der: bytes) -> bytes:
    """Return a token in its one form: of two ways to write an algorithm, the one of RFC 5754."""
    to_be_signed = asn1_x509.Certificate.load(certificate_der, strict=True)["tbs_certificate"]
    digest = _DIGESTS[signer["digest_algorithm"]["algorithm"].native]
    used = signer["signature_algorithm"]
    signature = _SIGNATURES[used.signature_algo, _hash_of(signer)]
    parts = tlv(
        SEQUENCE,
        small(1),
        tlv(SEQUENCE, to_be_signed["issuer"].dump(), to_be_signed["serial_number"].dump()),
        digest,
        tlv(CONTEXT_0, signer["signed_attrs"].contents),
        signature,
        tlv(OCTETS, signer["signature"].native),
    )
    info = tlv(CONTEXT_0, tlv(OCTETS, _info_der(data)))
    content = tlv(
        SEQUENCE,
        small(3),
        tlv(SET, digest),
        tlv(SEQUENCE, _INFO, info),
        tlv(CONTEXT_0, certificate_der),
        tlv(SET, parts),
    )
    return tlv(SEQUENCE, _SIGNED_DATA, tlv(CONTEXT_0, content))


def _info_der(data: Any) -> bytes:
    der: bytes = data["encap_content_info"]["content"].contents
    return der


def _hash_of(signer: Any) -> str:
    """Return the digest under the signature value: RSA may leave it to the digest algorithm."""
    used = signer["signature_algorithm"]
    plain = used["algorithm"].native == "rsassa_pkcs1v15"
    name: str = signer["digest_algorithm"]["algorithm"].native if plain else used.hash_algo
    return name


def _read(token: bytes, value: bytes) -> TimeStamp:
    data = cms.ContentInfo.load(token, strict=True)["content"]
    (signer,) = data["signer_infos"]
    (choice,) = data["certificates"]
    certificate_der = choice.chosen.dump()
    if _build(data, signer, certificate_der) != token:
        raise VerificationRefused("the time stamp holds something that is not signed, or is written in another way")
    attributes = {a["type"].native: a["values"] for a in signer["signed_attrs"]}
    if len(attributes) != len(signer["signed_attrs"]):
        raise VerificationRefused("the time stamp states an attribute twice")
    if attributes["content_type"][0].native != "tst_info":
        raise VerificationRefused("the time stamp holds something else")
    if attributes["message_digest"][0].native != _digest(
        signer["digest_algorithm"]["algorithm"].native, _info_der(data)
    ):
        raise VerificationRefused("the time stamp was changed after signing")
    _check_binding(attributes, certificate_der)
    certificate = x509.load_der_x509_certificate(certificate_der)
    _check_value(certificate, signer)
    _check_purpose(certificate)
    info = tsp.TSTInfo.load(_info_der(data), strict=True)
    imprint = info["message_imprint"]
    if imprint["hash_algorithm"]["algorithm"].native != "sha256" or (
        imprint["hashed_message"].native != sha256(value).digest()
    ):
        raise VerificationRefused("the time stamp is over another signature")
    time: datetime = info["gen_time"].native
    return TimeStamp(time, certificate)


def _check_binding(attributes: dict[str, Any], certificate_der: bytes) -> None:
    """See that the signature names its certificate by digest (RFC 3161, 2.4.2; RFC 5816)."""
    if "signing_certificate_v2" in attributes:
        first = attributes["signing_certificate_v2"][0]["certs"][0]
        algorithm = first["hash_algorithm"]["algorithm"].native
        bound = first["cert_hash"].native == _digest(algorithm, certificate_der)
    elif "signing_certificate" in attributes:
        # RFC 3161 knows SHA-1 only here: it tells two certificates of one server apart, the signature is by SHA-2
        first = attributes["signing_certificate"][0]["certs"][0]
        bound = first["cert_hash"].native == sha1(certificate_der, usedforsecurity=False).digest()
    else:
        bound = False
    if not bound:
        raise VerificationRefused("the time stamp does not bind its server's certificate")


def _check_value(certificate: x509.Certificate, signer: Any) -> None:
    public, value = certificate.public_key(), signer["signature"].native
    signed = tlv(SET, signer["signed_attrs"].contents)
    kind, algorithm = signer["signature_algorithm"].signature_algo, HASHES[_hash_of(signer)]()
    try:
        if isinstance(public, ec.EllipticCurvePublicKey) and kind == "ecdsa":
            if encode_dss_signature(*decode_dss_signature(value)) != value:
                raise VerificationRefused("the time stamp's value is not written in the one allowed way")
            public.verify(value, signed, ec.ECDSA(algorithm))
        elif isinstance(public, rsa.RSAPublicKey) and kind == "rsassa_pkcs1v15":
            public.verify(value, signed, padding.PKCS1v15(), algorithm)
        else:
            raise VerificationRefused("the time stamp is signed in a way that this program does not know")
    except InvalidSignature as error:
        raise VerificationRefused("the time stamp was changed after signing") from error


def _check_purpose(certificate: x509.Certificate) -> None:
    """See that the certificate is for time stamps, critically and for nothing else (RFC 3161, 2.3)."""
    purposes = certificate.extensions.get_extension_for_class(x509.ExtendedKeyUsage)
    if not purposes.critical or list(purposes.value) != [ExtendedKeyUsageOID.TIME_STAMPING]:
        raise VerificationRefused("the time stamp's signer is no time-stamp server")


def _digest(algorithm: str, data: bytes) -> bytes:
    digest = hashes.Hash(HASHES[algorithm]())
    digest.update(data)
    return digest.finalize()
