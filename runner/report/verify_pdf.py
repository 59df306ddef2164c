"""Reads a signed PDF: what is signed, that nothing was added, and what is attached.

The bytes are judged first, by position; a PDF library looks at the same file only afterwards, as a second opinion on
how readers take it (it may call files with appended or shadowed parts sound).

References:
    ISO 32000-2:2020, 7.5.6 (incremental updates), 7.11.4 (embedded files), 12.8 (signatures).
"""

import logging
import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from hashlib import sha256
from io import BytesIO
from typing import Any

from runner.errors import VerificationRefused
from runner.report import cms_form
from runner.report.cms_form import Signature, refusing

_RANGE = re.compile(rb"/ByteRange ?\[([^\]]{0,80})\]")
_NUMBERS = re.compile(rb"0 ([1-9][0-9]{0,11}) ([1-9][0-9]{0,11}) ([1-9][0-9]{0,11})")
_HEX = re.compile(rb"(?:[0-9A-F]{2})+")
_TIME = re.compile(rb"/M \(D(?:\\072|:)([0-9]{14})Z\)")


@dataclass(frozen=True)
class SignedPdf:
    """A PDF whose signature is true over every byte but its own."""

    data: bytes
    """The file."""
    start: int
    """Where the signature's gap begins, with its `<`."""
    end: int
    """One past its `>`."""
    signature: Signature
    """What the CMS says."""
    time: datetime
    """Claimed signing time."""

    @property
    def blank(self) -> bytes:
        """The file with zeros in place of the signature."""
        return self.data[: self.start + 1] + b"0" * (self.end - self.start - 2) + self.data[self.end - 1 :]


def read_signature(data: bytes) -> SignedPdf:
    """Find the one signature of a PDF and see that it is true over the whole file.

    Raises:
        VerificationRefused: There is none or more than one, it leaves bytes out, or it is not true.
    """
    if not data.startswith(b"%PDF-1.") or not data.endswith(b"\n%%EOF\n"):
        raise VerificationRefused("it is no whole PDF as this program writes them: something was cut off or appended")
    start, end = _gap(data)
    text = data[start + 1 : end - 1]
    if _HEX.fullmatch(text) is None:
        raise VerificationRefused("the signature is not written in capital hexadecimal digits")
    contents = bytes.fromhex(text.decode("ascii"))
    size = cms_form.length(contents)
    if contents[size:].strip(b"\0"):
        raise VerificationRefused("something stands behind the signature in its own gap")
    covered = sha256(memoryview(data)[:start])
    covered.update(memoryview(data)[end:])
    signature = cms_form.read(contents[:size], covered.digest(), timed=False)
    return SignedPdf(data, start, end, signature, _claimed(data[end:]))


def _gap(data: bytes) -> tuple[int, int]:
    ranges = _RANGE.findall(data)
    if not ranges:
        raise VerificationRefused("it carries no signature")
    if len(ranges) > 1:
        raise VerificationRefused("it carries more than one signature")
    numbers = _NUMBERS.fullmatch(ranges[0])
    if numbers is None:
        raise VerificationRefused("the signature does not say which bytes it covers")
    start, end, rest = (int(n) for n in numbers.groups())
    if end + rest < len(data):
        raise VerificationRefused("something was appended after signing: the signature does not cover the whole file")
    if end + rest > len(data) or end - start < 4:
        raise VerificationRefused("the signature does not cover the file as it is: something was cut off")
    plain = data[start : start + 1] == b"<" and data[end - 1 : end] == b">" and data[:start].endswith(b"/Contents ")
    if not plain or not data[end : end + 20].lstrip().startswith(b"/ByteRange"):
        raise VerificationRefused("the signature leaves out more than itself")
    return start, end


def _claimed(tail: bytes) -> datetime:
    times = _TIME.findall(tail)
    try:
        (text,) = times
        return datetime.strptime(text.decode("ascii"), "%Y%m%d%H%M%S").replace(tzinfo=UTC)
    except ValueError as error:
        raise VerificationRefused("the signature does not say when it was made") from error


def check_structure(signed: SignedPdf) -> None:
    """See that a PDF library, too, finds one certification signature over the whole file that allows no change.

    Raises:
        VerificationRefused: It does not.
    """
    from pyhanko.pdf_utils.reader import PdfFileReader  # noqa: PLC0415 - heavy
    from pyhanko.sign.fields import MDPPerm  # noqa: PLC0415
    from pyhanko.sign.validation.status import SignatureCoverageLevel  # noqa: PLC0415

    with quiet(), refusing("a reader cannot take it apart"):
        reader = PdfFileReader(BytesIO(signed.data))
        embedded = reader.embedded_signatures
        if len(embedded) != 1:
            raise VerificationRefused(f"a reader finds {len(embedded)} signatures in place of one")
        (one,) = embedded
        status = _status(one)
        if "/DocMDP" not in reader.root.get("/Perms", {}):
            raise VerificationRefused("a reader finds that it is signed, but not closed to changes")
        certified = reader.root["/Perms"].raw_get("/DocMDP").reference
        faults = {
            "its signature is not intact": status.intact and status.valid,
            "its signature does not cover the whole file": one.coverage == SignatureCoverageLevel.ENTIRE_FILE,
            "it was changed after signing": status.docmdp_ok,
            "it is not closed to changes": one.docmdp_level == MDPPerm.NO_CHANGES,
            "its certification is another object": certified == one.sig_object.container_ref,
            "it has more than one revision": reader.xrefs.total_revisions == 2,
            "its signing time is another": one.self_reported_timestamp == signed.time,
            "its signature is another": one.pkcs7_content[: len(_der(signed))] == _der(signed),
        }
    for fault, held in faults.items():
        if not held:
            raise VerificationRefused(f"a reader finds that {fault}")


def _status(one: Any) -> Any:
    from pyhanko.sign.validation import validate_pdf_signature  # noqa: PLC0415 - heavy
    from pyhanko_certvalidator import ValidationContext  # noqa: PLC0415

    # whom to trust is decided elsewhere (verify_signer); here only the mathematics and the structure count
    context = ValidationContext(trust_roots=[one.signer_cert], allow_fetching=False, moment=one.self_reported_timestamp)
    return validate_pdf_signature(one, context, ts_validation_context=context)


def _der(signed: SignedPdf) -> bytes:
    contents = bytes.fromhex(signed.data[signed.start + 1 : signed.end - 1].decode("ascii"))
    return contents[: cms_form.length(contents)]


def attachments(data: bytes) -> dict[str, bytes]:
    """Return a PDF's attached files by name.

    Raises:
        VerificationRefused: A name stands twice, a file is attached in some other way, or one has another relation.
    """
    import pikepdf  # noqa: PLC0415 - heavy

    with quiet(), refusing("its attachments cannot be read"), pikepdf.open(BytesIO(data)) as pdf:
        tree = pdf.Root.Names.EmbeddedFiles
        found = [(str(name), spec) for name, spec in pikepdf.NameTree(tree).items()]
        listed = {spec.objgen for _, spec in found}
        holders = [o for o in pdf.objects if isinstance(o, pikepdf.Dictionary) and "/EF" in o]
        embedded = [o for o in pdf.objects if isinstance(o, pikepdf.Stream) and o.get("/Type") == "/EmbeddedFile"]
        names = [name for name, _ in found]
        if len(set(names)) != len(names):
            raise VerificationRefused("a file is attached twice under one name")
        if any({str(spec.F), str(spec.UF)} != {name} or len(spec.EF) > 1 for name, spec in found):
            raise VerificationRefused("a file is attached under two names")
        if {o.objgen for o in holders} != listed or len(embedded) != len(found):
            raise VerificationRefused("a file is attached that the list of attachments does not name")
        if any(spec.get("/AFRelationship") != _relationship(name) for name, spec in found):
            raise VerificationRefused("an attached file is not marked as what it is to the report")
        return {name: bytes(spec.EF.F.read_bytes()) for name, spec in found}


def _relationship(name: str) -> str:
    """Return what a file must be to the document (ISO 19005-3): the results are its data, all else adds to it."""
    return "/Data" if name == "results.json" else "/Supplement"


@contextmanager
def quiet() -> Iterator[None]:
    """Keep the PDF libraries from logging tracebacks about files that are refused anyway."""
    names = ("pyhanko", "pyhanko_certvalidator", "pikepdf", "pypdf")
    before = {name: logging.getLogger(name).level for name in names}
    for name in names:
        logging.getLogger(name).setLevel(logging.CRITICAL + 1)
    try:
        yield
    finally:
        for name, level in before.items():
            logging.getLogger(name).setLevel(level)
