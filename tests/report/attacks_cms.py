"""Changes of a CMS that its signature does not cover: outer lists, unsigned attributes, other ways of writing.

Source: RFC 5652 (2009), 5.3 and 5.4: only content and signed attributes are under the signature.
"""

from collections.abc import Callable
from typing import Any

from asn1crypto import algos, cms, core
from asn1crypto import x509 as asn1_x509
from cryptography.hazmat.primitives.asymmetric.utils import decode_dss_signature, encode_dss_signature
from cryptography.hazmat.primitives.serialization import Encoding

from runner.report import cms_form
from tests.report.signed_world import Authority


def _edited(der: bytes, change: Callable[[Any, Any], None]) -> bytes:
    content = cms.ContentInfo.load(der)
    data = content["content"]
    change(data, data["signer_infos"][0])
    edited: bytes = content.dump(force=True)
    return edited


def twin_value(der: bytes, _authority: Authority) -> bytes:
    """The other valid ECDSA value (r, n - s)."""

    def change(_data: Any, signer: Any) -> None:
        r, s = decode_dss_signature(signer["signature"].native)
        signer["signature"] = encode_dss_signature(r, cms_form.P256_ORDER - s)

    return _edited(der, change)


def outer_digests(der: bytes, _authority: Authority) -> bytes:
    """Another algorithm in the outer list."""

    def change(data: Any, _signer: Any) -> None:
        data["digest_algorithms"] = [algos.DigestAlgorithm({"algorithm": "sha512"})]

    return _edited(der, change)


def outer_digest_null(der: bytes, _authority: Authority) -> bytes:
    """An explicit NULL where there may be nothing."""

    def change(_data: Any, signer: Any) -> None:
        signer["digest_algorithm"] = {"algorithm": "sha256", "parameters": core.Null()}

    return _edited(der, change)


def root_embedded(der: bytes, authority: Authority) -> bytes:
    """The root among the certificates, which nothing signs."""

    def change(data: Any, _signer: Any) -> None:
        root = asn1_x509.Certificate.load(authority.root.public_bytes(Encoding.DER))
        data["certificates"].append(cms.CertificateChoices("certificate", root))

    return _edited(der, change)


def unsigned_attribute(der: bytes, _authority: Authority) -> bytes:
    """An unsigned attribute that is no time stamp."""

    def change(_data: Any, signer: Any) -> None:
        signer["unsigned_attrs"] = [{"type": "1.3.6.1.4.1.99999.1", "values": [core.Integer(1)]}]

    return _edited(der, change)


def two_signers(der: bytes, _authority: Authority) -> bytes:
    """The same signer twice."""

    def change(data: Any, signer: Any) -> None:
        data["signer_infos"].append(signer)

    return _edited(der, change)


def other_version(der: bytes, _authority: Authority) -> bytes:
    """Another version number outside the signature."""

    def change(data: Any, _signer: Any) -> None:
        data["version"] = "v3"

    return _edited(der, change)


def indefinite_length(der: bytes, _authority: Authority) -> bytes:
    """The outer length written the open way (BER)."""
    head = 2 + (der[1] & 0x7F if der[1] & 0x80 else 0)
    return b"\x30\x80" + der[head:] + b"\0\0"


def long_length(der: bytes, _authority: Authority) -> bytes:
    """The outer length with a zero before it."""
    count = der[1] & 0x7F
    return bytes([0x30, 0x80 | (count + 1), 0]) + der[2:]


def trailing(der: bytes, _authority: Authority) -> bytes:
    """Bytes behind the end."""
    return der + b"\x05\x00"


def emptied(der: bytes, _authority: Authority) -> bytes:
    """No signer at all."""

    def change(data: Any, _signer: Any) -> None:
        data["signer_infos"] = []

    return _edited(der, change)


CmsAttack = Callable[[bytes, Authority], bytes]
CMS: tuple[CmsAttack, ...] = (
    twin_value,
    outer_digests,
    outer_digest_null,
    root_embedded,
    unsigned_attribute,
    two_signers,
    other_version,
    indefinite_length,
    long_length,
    trailing,
    emptied,
)
"""What can be done to a CMS without touching what its signature covers."""
