"""The parts of one report: its PDF, its HTML page, and what lies beside them, each checked and then held together."""

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from hashlib import sha256
from typing import Any

from cryptography import x509
from cryptography.hazmat.primitives.hashes import SHA256

from runner.errors import VerificationRefused
from runner.report import cms_form, verify_content, verify_frames, verify_pdf, verify_record, verify_signer
from runner.report.cms_form import Signature
from runner.report.verify_record import Check, Terms


@dataclass(frozen=True)
class Files:
    """The files of one report as bytes."""

    pdf: bytes | None = None
    """The PDF."""
    html: bytes | None = None
    """The HTML page."""
    p7s: bytes | None = None
    """Its signature."""
    results: bytes | None = None
    """`results.json` beside them."""
    pictures: Mapping[str, bytes] | None = None
    """Pictures beside them, by name."""


@dataclass(frozen=True)
class Contents:
    """What a report says, out of a signed file or confirmed by one."""

    document: dict[str, Any]
    """The results."""
    results: bytes
    """Bytes of `results.json`."""
    pictures: Mapping[str, bytes]
    """Pictures by name."""


def check_pdf(data: bytes, terms: Terms, checks: list[Check]) -> tuple[x509.Certificate, Contents]:
    """Check a PDF by itself; return its signer's certificate and what it says.

    Raises:
        VerificationRefused: It does not hold; the checks so far stand in `checks`.
    """
    signed = verify_pdf.read_signature(data)
    verify_pdf.check_structure(signed)
    checks.append(Check("signature", True, "the PDF is as it was signed, whole and closed to changes"))
    checks += verify_signer.check_signer(signed.signature, signed.time, terms)
    attached = verify_pdf.attachments(data)
    document, pictures = verify_content.read_results(attached, terms)
    contents = Contents(document, attached[verify_content.RESULTS], pictures)
    found = f"results.json is attached, and exactly the pictures that it lists ({len(pictures)})"
    checks.append(Check("attachments", True, found))
    checks.append(verify_content.check_pdf_page(signed, document, pictures, contents.results, terms))
    return signed.signature.certificate, contents


def check_html(files: Files, contents: Contents | None, terms: Terms, checks: list[Check]) -> x509.Certificate:
    """Check an HTML page with its detached signature; return the signer's certificate.

    Args:
        files: With the page and its signature.
        contents: What it should show, if that is known.
        terms: What the reader trusts.
        checks: Takes the checks.

    Raises:
        VerificationRefused: It does not hold; the checks so far stand in `checks`.
    """
    html = files.html or b""
    signature, claimed = read_detached(html, files.p7s)
    checks.append(Check("signature", True, "the HTML page is as it was signed"))
    checks += verify_signer.check_signer(signature, claimed, terms)
    if contents is None:
        found = "results.json and its pictures are not beside the HTML page, so nothing is there to compare it with"
        checks.append(Check("page", None, found, verify_record.NO_PAGE))
    else:
        checks.append(verify_content.check_html_page(html, contents.document, contents.pictures, terms))
    return signature.certificate


def read_detached(data: bytes, p7s: bytes | None) -> tuple[Signature, datetime]:
    """Read a detached signature over some bytes; return it and the signing time that it claims.

    Raises:
        VerificationRefused: There is none, or it is not true over these bytes.
    """
    if p7s is None:
        raise VerificationRefused("its signature is missing: the .p7s file belongs beside it")
    try:
        signature = cms_form.read(p7s, sha256(data).digest(), timed=True)
    except VerificationRefused:
        unix = data.replace(b"\r\n", b"\n")
        for other in (unix, unix.replace(b"\n", b"\r\n"), data.removeprefix(b"\xef\xbb\xbf"), data.rstrip() + b"\n"):
            if other != data and _true(p7s, other):
                raise VerificationRefused(
                    "its line ends were changed on the way (mail, git autocrlf or an editor does that), nothing else",
                    next_step="get the file again as it was sent, packed or as a binary attachment",
                ) from None
        raise
    return signature, signature.time or datetime.max.replace(tzinfo=UTC)


def _true(p7s: bytes, data: bytes) -> bool:
    try:
        cms_form.read(p7s, sha256(data).digest(), timed=True)
    except VerificationRefused:
        return False
    return True


def loose_contents(files: Files, terms: Terms) -> Contents | None:
    """Return what lies beside an HTML page, if it is there.

    Raises:
        VerificationRefused: It is there and does not hold together.
    """
    if files.results is None:
        return None
    document, pictures = verify_content.read_results(
        {verify_content.RESULTS: files.results, **(files.pictures or {})}, terms
    )
    return Contents(document, files.results, pictures)


def check_together(files: Files, contents: Contents, signers: list[x509.Certificate]) -> Check:
    """Check that what lies beside a PDF is what is inside it, and that one signer signed all."""
    odd = []
    if files.results is not None and files.results != contents.results:
        odd.append("results.json is another than the signed one")
    for name, data in (files.pictures or {}).items():
        if contents.pictures.get(name) != data:
            odd.append(f"the picture {name} is not the signed one")
    if len({one.fingerprint(SHA256()) for one in signers}) > 1:
        odd.append("PDF and HTML page are signed by different certificates")
    if odd:
        return Check("files", False, "; ".join(odd))
    return Check("files", True, "all files of the report agree")


def check_document(contents: Contents, terms: Terms, folder: str | None = None, *, lot: bool = False) -> list[Check]:
    """Check what a report says: the expected unit, verdicts that follow, and with frames every value.

    Args:
        contents: What it says.
        terms: What the reader expects.
        folder: Name of the folder that was given, or None for a file.
        lot: The folder is one of a lot's.
    """
    checks = [*verify_content.check_expected(contents.document, terms)]
    if folder is not None:
        checks += verify_content.check_serial(contents.document, folder, lot=lot)
    checks.append(verify_content.check_verdicts(contents.document, terms))
    if terms.frames is not None:
        checks += verify_frames.check_frames(contents.document, terms.frames, terms)
    return checks
