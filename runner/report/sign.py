"""Signs: a PDF from inside (PAdES, closed to changes), any other bytes by a detached CMS.

Everything that signing adds to a PDF follows from the PDF, the signer's certificate and the time; only the signature
value does not. So whoever can print the pages again can also build the whole signed file again and compare it.

References:
    ISO 32000-2:2020, 12.8.1 to 12.8.3; ETSI EN 319 142-1 V1.2.1 (PAdES baseline B-B, B-T).
"""

from dataclasses import dataclass
from datetime import UTC, datetime
from hashlib import sha256
from io import BytesIO
from typing import Any

from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding

from runner.errors import SigningError
from runner.report import cms_form, time_stamp
from runner.report.keys import StationKey

FIELD = "Report"
READABLE_FIELD = "Signature of the test station"
REASON = "Test report, closed to changes"
STAMP_BYTES = 10_000
"""Room for a time stamp; one has 3,000 to 7,000 bytes."""
ATTRIBUTE_BYTES = 600
"""Room for a signature without its certificate and names."""


@dataclass(frozen=True)
class Prepared:
    """A PDF ready for its signature."""

    data: bytearray
    """The whole file, zeros where the signature goes."""
    digest: bytes
    """SHA-256 of all but the gap."""
    start: int
    """Where the gap begins, with its `<`."""
    end: int
    """One past its `>`."""


def sign_pdf(
    pdf: bytes,
    key: StationKey,
    *,
    time: datetime,
    timestamp_url: str | None = None,
    stamp_required: bool = True,
) -> bytes:
    """Sign a PDF by a certification signature that allows no change, in one revision, with an invisible field.

    Args:
        pdf: The file, not signed before.
        key: Signs.
        time: Claimed signing time.
        timestamp_url: RFC 3161 server, or None.
        stamp_required: Refuse to sign when the server does not serve; else sign without.

    Raises:
        SigningError: The file is no plain PDF, the time lies outside the certificate's, or the server does not serve.
    """
    moment = _moment(time, key)
    prepared = prepare(pdf, key.certificate, moment, stamped=timestamp_url is not None)
    try:
        der = _sign(prepared.digest, key, None, timestamp_url)
    except SigningError:
        if stamp_required or timestamp_url is None:
            raise
        return sign_pdf(pdf, key, time=time)
    room = prepared.end - prepared.start - 2
    text = der.hex().upper().encode()
    if len(text) > room:
        raise SigningError("the certificate or the time stamp is larger than a signature's room in a PDF")
    prepared.data[prepared.start + 1 : prepared.start + 1 + len(text)] = text
    return bytes(prepared.data)


def sign_detached(
    data: bytes,
    key: StationKey,
    *,
    time: datetime | None = None,
    timestamp_url: str | None = None,
    stamp_required: bool = True,
) -> bytes:
    """Return a detached CMS (DER) over any bytes, with the signing time among its signed attributes.

    Args:
        data: What is signed.
        key: Signs.
        time: Claimed signing time; None is now.
        timestamp_url: RFC 3161 server, or None.
        stamp_required: Refuse to sign when the server does not serve; else sign without.

    Raises:
        SigningError: The time lies outside the certificate's, or the server does not serve.
    """
    moment = _moment(time or datetime.now(UTC), key)
    try:
        return _sign(sha256(data).digest(), key, moment, timestamp_url)
    except SigningError:
        if stamp_required or timestamp_url is None:
            raise
        return _sign(sha256(data).digest(), key, moment, None)


def prepare(pdf: bytes, certificate: x509.Certificate, time: datetime, *, stamped: bool) -> Prepared:
    """Add the signature's field and dictionary to a PDF and leave a gap for the signature.

    The same arguments give the same bytes, on the same versions of the libraries.

    Args:
        pdf: The file, not signed before.
        certificate: Of the signer; only the room for it is taken from here.
        time: Claimed signing time, whole seconds UTC.
        stamped: Leave room for a time stamp.

    Raises:
        SigningError: The file is no plain PDF.
    """
    # heavy, and only needed here
    from pyhanko.sign.fields import MDPPerm, SigFieldSpec, SigSeedSubFilter  # noqa: PLC0415
    from pyhanko.sign.signers import cms_embedder, pdf_byterange  # noqa: PLC0415

    if b"/ByteRange" in pdf:
        raise SigningError("the PDF was signed before")
    try:
        writer = _writer(pdf, time)
        embedder = cms_embedder.PdfCMSEmbedder(SigFieldSpec(FIELD, on_page=-1, readable_field_name=READABLE_FIELD))
        steps: Any = embedder.write_cms(FIELD, writer)
        next(steps)
        placeholder = pdf_byterange.SignatureObject(
            time, SigSeedSubFilter.PADES, reason=REASON, bytes_reserved=2 * _room(certificate, stamped=stamped)
        )
        rules = cms_embedder.SigMDPSetup("sha256", certify=True, docmdp_perms=MDPPerm.NO_CHANGES)
        steps.send(cms_embedder.SigObjSetup(placeholder, mdp_setup=rules))
        digest, output = steps.send(cms_embedder.SigIOSetup("sha256"))
    except Exception as error:
        # a damaged file raises anything
        raise SigningError(f"the PDF cannot be signed: {type(error).__name__}: {error}") from error
    return Prepared(
        bytearray(output.getvalue()), digest.document_digest, digest.reserved_region_start, digest.reserved_region_end
    )


def _writer(pdf: bytes, time: datetime) -> Any:
    from pyhanko.pdf_utils import generic  # noqa: PLC0415 - heavy
    from pyhanko.pdf_utils.incremental_writer import IncrementalPdfFileWriter  # noqa: PLC0415

    class Keep(IncrementalPdfFileWriter):
        """Adds to a PDF and leaves its metadata as they are; its new file identifier follows from file and time."""

        def _update_meta(self) -> None:
            """Do nothing: the pages' own metadata are to stay byte for byte."""

        @classmethod
        def _handle_id(cls, prev: Any) -> Any:
            first, _ = super()._handle_id(prev)  # type: ignore[no-untyped-call]
            identity = sha256(pdf + time.isoformat().encode()).digest()[:16]
            return generic.ArrayObject([first, generic.ByteStringObject(identity)])

    return Keep(BytesIO(pdf))


def _room(certificate: x509.Certificate, *, stamped: bool) -> int:
    """Return the bytes that a signature may take: its certificate, the issuer's name again, all else; in steps."""
    size = len(certificate.public_bytes(Encoding.DER)) + len(certificate.issuer.public_bytes()) + ATTRIBUTE_BYTES
    size += STAMP_BYTES if stamped else 0
    return -(-size // 512) * 512


def _moment(time: datetime, key: StationKey) -> datetime:
    if time.tzinfo is None:
        raise SigningError("the signing time says no time zone")
    moment = time.astimezone(UTC).replace(microsecond=0)
    begin, end = key.certificate.not_valid_before_utc, key.certificate.not_valid_after_utc
    if not begin <= moment <= end:
        raise SigningError(
            f"the signing time {moment:%Y-%m-%d %H:%M:%S} UTC lies outside the certificate's",
            allowed=f"{begin:%Y-%m-%d %H:%M:%S} to {end:%Y-%m-%d %H:%M:%S} UTC",
            next_step="look at the computer's clock, or make a new key",
        )
    return moment


def _sign(digest: bytes, key: StationKey, time: datetime | None, url: str | None) -> bytes:
    value = cms_form.sign_digest(digest, key.private, key.certificate, time)
    stamp = None if url is None else time_stamp.request(url, value)
    return cms_form.build(digest, key.certificate, time, value, stamp)
