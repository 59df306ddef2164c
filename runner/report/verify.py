"""Verifies reports offline: signature, signer, contents, page, verdicts, and with the frames every value.

Whatever goes wrong on the way is a refusal; what is sound but cannot be vouched for or compared is told apart from it.
"""

from collections.abc import Callable, Collection, Iterator
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

from cryptography import x509

from runner.errors import ProbatumError, UsageError
from runner.exits import Exit
from runner.report import certificates as profiles
from runner.report import store, verify_lot, verify_parts
from runner.report.verify_parts import Files
from runner.report.verify_record import ACCEPTABLE, Check, Outcome, Terms, Tools
from runner.report.verify_tools import default_tools

T = TypeVar("T")
REPORTS = (store.PDF, store.HTML, store.RESULTS)


def verify(path: Path, terms: Terms) -> Iterator[Outcome]:
    """Verify a report, a unit's folder, or a lot's folder: every unit in it and then the lot's own files.

    Args:
        path: PDF or HTML report, or a folder.
        terms: What the reader trusts, from `terms_of`.

    Raises:
        UsageError: There is no report at that place.
    """
    units = _units(path)
    lot, documents = verify_lot.has_files(path), []
    if not units and (not lot or _holds_report(path)):
        yield _verify_one(path, terms)
        return
    if _holds_report(path):  # a good report laid into a lot's own folder hides none of its units
        yield _one_of_many(path, terms, lot=False)
    for folder in units:
        outcome = _one_of_many(folder, terms, lot=lot)
        documents.append(None if outcome.exit is Exit.DOES_NOT_CONFORM else outcome.document)
        yield outcome
    if lot:
        yield verify_lot.check_lot(path, documents, terms)


def _one_of_many(folder: Path, terms: Terms, *, lot: bool) -> Outcome:
    try:
        return _verify_one(folder, terms, lot=lot)
    except UsageError as error:  # one folder's trouble stops no other
        return Outcome(folder, (Check("report", False, error.found),), accept=terms.accept)


def verify_unit(folder_or_file: Path, *, tools: Tools | None = None, **terms: Any) -> Outcome:
    """Verify one report or one unit's folder.

    Args:
        folder_or_file: PDF or HTML report (its `.p7s` beside it), or a unit's folder.
        tools: The rest of the program; default: its own.
        terms: As of `terms_of`.

    Raises:
        UsageError: There is no report at that place, or the terms cannot be used.
    """
    return _verify_one(folder_or_file, terms_of(tools=tools, **terms))


def terms_of(
    *,
    roots: Collection[x509.Certificate] = (),
    crl: Collection[x509.CertificateRevocationList] = (),
    accept: Collection[str] = (),
    frames: Path | None = None,
    serial: str | None = None,
    spec_digest: str | None = None,
    now: datetime | None = None,
    tools: Tools | None = None,
) -> Terms:
    """Return the terms of a verification.

    Args:
        roots: Authorities that the reader trusts; without any, the signer is not vouched for.
        crl: Revocation lists.
        accept: Words of `verify_record.ACCEPTABLE`.
        frames: Folder of frames, to measure again.
        serial: Unit that the reader expects.
        spec_digest: Spec that the reader expects.
        now: Time of verifying; default: now.
        tools: The rest of the program; default: its own.

    Raises:
        UsageError: A word of `accept` is unknown, or a root is no authority's certificate.
    """
    unknown = sorted(set(accept) - ACCEPTABLE.keys())
    if unknown:
        raise UsageError(f"'{unknown[0]}' is nothing that can be accepted", allowed=", ".join(ACCEPTABLE))
    for root in roots:
        fault = profiles.authority_fault(root)
        if fault:
            name = profiles.common_name(root)
            step = "give the authority's root.pem"
            raise UsageError(f"'{name}' cannot be trusted as a root: {fault}", next_step=step)
    moment = now or datetime.now(UTC)
    asked = Terms(tools or default_tools(), tuple(roots), tuple(crl), frozenset(accept), now=moment)
    return replace(asked, frames=frames, serial=serial, spec_digest=spec_digest)


def _units(path: Path) -> list[Path]:
    """Return the unit folders of a lot's folder; none if it is something else."""
    try:
        inside = sorted(p for p in path.iterdir() if p.is_dir()) if path.is_dir() else []
        return [p for p in inside if not p.name.startswith(".") and _holds_report(p)]
    except OSError as error:
        raise UsageError(f"it cannot be read: {error.strerror}", where=str(path)) from error


def _holds_report(folder: Path) -> bool:
    return any((folder / name).is_file() for name in REPORTS)


def _verify_one(path: Path, terms: Terms, *, lot: bool = False) -> Outcome:
    try:
        files, remarks = _read(path)
    except OSError as error:
        raise UsageError(f"it cannot be read: {error.strerror}", where=str(path)) from error
    checks: list[Check] = []
    signers: list[x509.Certificate] = []
    contents = None
    if files.pdf is not None:
        own: list[Check] = []
        found = _refusing(own, "report", lambda: verify_parts.check_pdf(files.pdf or b"", terms, own))
        checks += _named("PDF", own)
        if found is not None:
            signer, contents = found
            signers.append(signer)
    elif files.html is not None:
        contents = _refusing(checks, store.RESULTS, lambda: verify_parts.loose_contents(files, terms))
    if files.html is not None:
        mine: list[Check] = []
        page = _refusing(mine, "report", lambda: verify_parts.check_html(files, contents, terms, mine))
        checks += _named("HTML", mine)
        signers += [] if page is None else [page]
    if contents is not None and signers:
        known = contents
        place = path.resolve().name if path.is_dir() else None
        said = _refusing(checks, "contents", lambda: verify_parts.check_document(known, terms, place, lot=lot))
        checks += said or []
        if path.is_dir():
            checks.append(verify_parts.check_together(files, known, signers))
    if not terms.roots:
        marks = dict.fromkeys(profiles.fingerprint(one) for one in signers)
        remarks += [f"digest of the signer's certificate in full: {mark}" for mark in marks]
    if terms.crls and not terms.roots:
        remarks.append("no revocation list was looked at: it counts only with its authority, and no --root was given")
    if not terms.crls and terms.roots:
        remarks.append("whether the certificate was revoked was not checked: no --crl was given")
    document = contents.document if contents is not None and signers else None
    return Outcome(path, tuple(checks), tuple(remarks), terms.accept, document)


def _named(file: str, checks: list[Check]) -> list[Check]:
    return [replace(check, name=f"{file} {check.name}") for check in checks]


def _refusing(checks: list[Check], name: str, step: Callable[[], T]) -> T | None:
    """Take one step; whatever goes wrong in it is a refusal."""
    try:
        return step()
    except ProbatumError as error:
        checks.append(Check(name, False, str(error)))
    except Exception as error:  # noqa: BLE001 - damaged input raises anything, and none of it may look like a pass
        checks.append(Check(name, False, f"it cannot be checked: {type(error).__name__}: {error}"))
    return None


def _read(path: Path) -> tuple[Files, list[str]]:
    if path.is_dir():
        return _read_folder(path)
    if path.name.endswith(".p7s"):
        path = path.with_name(path.name.removesuffix(".p7s"))
    data = path.read_bytes()
    if path.suffix.lower() == ".pdf" or data.startswith(b"%PDF"):
        return Files(pdf=data), []
    if path.suffix.lower() in {".html", ".htm"}:
        beside, _ = _read_folder(path.parent, whole=False)
        return replace(beside, pdf=None, html=data, p7s=_maybe(path.with_name(path.name + ".p7s"))), []
    allowed = "report.pdf, report.html with its .p7s, or a folder of reports"
    raise UsageError("it is no report", where=str(path), allowed=allowed)


def _read_folder(folder: Path, *, whole: bool = True) -> tuple[Files, list[str]]:
    place = folder / store.PICTURES
    pictures = {p.name: p.read_bytes() for p in sorted(place.iterdir()) if p.is_file()} if place.is_dir() else None
    pdf, html, p7s, results = (
        _maybe(folder / name) for name in (store.PDF, store.HTML, store.HTML_SIGNATURE, store.RESULTS)
    )
    files = Files(pdf, html, p7s, results, pictures)
    if whole and files.pdf is None and files.html is None:
        allowed = f"{store.PDF} or {store.HTML}, which carry the signature"
        raise UsageError("there is no report in it", where=str(folder), allowed=allowed)
    known = {store.PDF, store.HTML, store.HTML_SIGNATURE, store.RESULTS, store.PICTURES}
    present = {p.name for p in folder.iterdir() if not p.name.startswith(".")}
    remarks = [f"not there: {name}" for name in sorted(known - present - {store.PICTURES})]
    remarks += [f"not part of the report, not looked at: {name}" for name in sorted(present - known)]
    return files, remarks


def _maybe(path: Path) -> bytes | None:
    return path.read_bytes() if path.is_file() else None
