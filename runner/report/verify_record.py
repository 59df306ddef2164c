"""What a verification asks, what it may use, and what it finds."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from cryptography import x509

from runner.exits import Exit

UNKNOWN_SIGNER = "unknown-signer"
STAMP = "unvouched-stamp"
CRL = "crl-out-of-date"
TEXT_ONLY = "page-by-text"
NO_PAGE = "page-not-compared"
WORDING = "wording-not-compared"
PICTURES = "pictures-not-compared"
ACCEPTABLE: Mapping[str, str] = {
    UNKNOWN_SIGNER: "no --root was given, so nobody vouches for the signer",
    STAMP: "the time stamp's server is not vouched for by any --root",
    CRL: "the revocation list is out of date or is not this authority's",
    TEXT_ONLY: "the page is not the same byte for byte, only its text is (another version printed it)",
    NO_PAGE: "the page cannot be printed again for comparison",
    WORDING: "the sentences were written by another version of the program",
    PICTURES: "pictures painted again from the frames differ (another version painted them)",
}
"""What `--accept` may name: things that leave a report sound, but not all of it vouched for."""


@dataclass(frozen=True)
class Check:
    """One thing looked at."""

    name: str
    """A few words."""
    held: bool | None
    """True: holds; False: refused; None: sound, but not vouched for or not comparable."""
    sentence: str
    """What was found, one plain sentence."""
    accept: str = ""
    """Where held is None: the word of `ACCEPTABLE` by which the reader takes it."""


@dataclass(frozen=True)
class Outcome:
    """What was found out about one report, or one folder's own files."""

    path: Path
    """What was looked at."""
    checks: tuple[Check, ...]
    """In the order of looking; a signature that does not hold ends the list."""
    remarks: tuple[str, ...] = ()
    """What a reader should know and what decides nothing."""
    accept: frozenset[str] = frozenset()
    """What the reader takes."""
    document: Mapping[str, Any] | None = None
    """The results, once they are known to be signed."""

    @property
    def exit(self) -> Exit:
        """0 everything holds, 1 refused, 3 sound but not all of it vouched for or compared."""
        if not self.checks or any(check.held is False for check in self.checks):
            return Exit.DOES_NOT_CONFORM
        if any(check.held is None and check.accept not in self.accept for check in self.checks):
            return Exit.CANNOT_DECIDE
        return Exit.CONFORMS


@dataclass(frozen=True)
class Tools:
    """The rest of the program as verification needs it; tests put stand-ins here."""

    program: Callable[[], dict[str, Any]]
    """Tells the versions of this program and of all that its pages depend on."""
    parse: Callable[[bytes], dict[str, Any]]
    """Reads `results.json` strictly."""
    render_pdf: Callable[[Mapping[str, Any], Mapping[str, bytes], bytes], bytes]
    """Prints results, pictures and the bytes of `results.json` to an unsigned PDF."""
    html_page: Callable[[Mapping[str, Any], Mapping[str, bytes]], str]
    """Prints results and pictures to HTML."""
    judge_again: Callable[[Mapping[str, Any]], dict[str, Any]]
    """Judges the readings of a results document again and writes the whole document anew."""
    measure_again: Callable[[Mapping[str, Any], Path], tuple[dict[str, Any], dict[str, bytes]]]
    """Measures from the frames in a folder; returns a whole document and its pictures."""
    lot_files: Callable[[Mapping[str, Any], tuple[Mapping[str, Any], ...]], dict[str, bytes]]
    """Writes a lot's files anew from the units' results, and from `lot.json` what files no pattern used."""


@dataclass(frozen=True)
class Terms:
    """What the reader of a report trusts and expects."""

    tools: Tools
    """The rest of the program."""
    roots: tuple[x509.Certificate, ...] = ()
    """Authorities that the reader trusts."""
    crls: tuple[x509.CertificateRevocationList, ...] = ()
    """Revocation lists."""
    accept: frozenset[str] = frozenset()
    """Words of `ACCEPTABLE`."""
    frames: Path | None = None
    """Folder of frames for measuring again."""
    serial: str | None = None
    """The unit that the reader expects."""
    spec_digest: str | None = None
    """The spec that the reader expects, `sha256:…`."""
    now: datetime = field(default_factory=lambda: datetime.now(UTC))
    """Time of verifying."""
