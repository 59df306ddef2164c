"""The report on paper: PDF/A-3u with the results and pictures attached, the same bytes for the same results."""

import logging
import re
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from datetime import datetime
from functools import cache
from hashlib import sha256
from io import BytesIO
from multiprocessing.util import Finalize
from typing import Any

from runner.errors import UsageError
from runner.report.page import paper_page
from runner.report.pdf_drawings import drawn
from runner.report.pdf_pictures import indexed
from runner.resources import folder

_FONTS = ("DejaVuSans.ttf", "DejaVuSans-Bold.ttf", "DejaVuSansMono.ttf")

_KNOWN = ("70",)
"""Main versions of the renderer whose inside `pdf_pictures` and `pdf_drawings` know."""


def render_pdf(document: Mapping[str, Any], pictures: Mapping[str, bytes], results_bytes: bytes) -> bytes:
    """Return a unit's report as PDF/A-3u, unsigned.

    Attached are exactly `results.json` (relationship Data) and the listed pictures (Supplement). Dates are the
    verdict's, the identifier is the digest of the results, fonts travel with the program, and nothing is fetched.

    Args:
        document: The results.
        pictures: PNG by name.
        results_bytes: `results.json` as written.

    Raises:
        UsageError: A character has no glyph in the fonts, or the system has no font at all.
    """
    from weasyprint import HTML  # noqa: PLC0415 - heavy

    _need_a_system_font()
    moment = datetime.fromisoformat(str(document["time"]))
    files = {f"report:/fonts/{name}": ("font/ttf", _font(name)) for name in _FONTS}
    files |= {f"report:/pictures/{name}": ("image/png", data) for name, data in pictures.items()}
    text, drawings = paper_page(document)
    files |= {a: ("image/png" if a.endswith(".png") else "image/svg+xml", data) for a, data in drawings.items()}
    fonts = _fonts()
    with _no_missing_glyph(), warnings.catch_warnings():
        # the renderer leaves its own colour profile to be closed by the garbage collector
        warnings.filterwarnings("ignore", "unclosed file .*icc", ResourceWarning)
        page = HTML(string=text, base_url="report:/", url_fetcher=_closed(files))
        written = page.write_pdf(
            font_config=fonts,
            pdf_variant="pdf/a-3u",
            pdf_tags=True,
            attachments=list(_attachments(document, pictures, results_bytes, moment)),
            pdf_identifier=sha256(results_bytes).digest()[:16],
            cache=_ready(files, fonts),
        )
    return bytes(written)


def _ready(files: Mapping[str, tuple[str, bytes]], fonts: Any) -> dict[str, Any]:
    """Return pictures and drawings in the renderer's own form, by address; it reads itself what is not among them.

    Saves a third of the printing time. It needs the renderer's inside, so any other version gets nothing.
    """
    from weasyprint import __version__ as version  # noqa: PLC0415 - heavy

    if version.split(".")[0] not in _KNOWN:
        return {}
    ready: dict[str, Any] = {}
    for address, (kind, data) in files.items():
        made = indexed(data) if kind == "image/png" else drawn(data, fonts) if kind == "image/svg+xml" else None
        if made is not None:
            ready[address] = made
    return ready


def _attachments(
    document: Mapping[str, Any], pictures: Mapping[str, bytes], results: bytes, moment: datetime
) -> Iterator[Any]:
    from weasyprint import Attachment  # noqa: PLC0415 - heavy

    rows = [("results.json", results, "Results of the test, from which this page was made", "Data")]
    rows += [
        (p["name"], pictures[p["name"]], "Picture shown in this report", "Supplement") for p in document["pictures"]
    ]
    for name, data, words, relationship in rows:
        yield Attachment(
            file_obj=BytesIO(data),
            name=name,
            description=words,
            created=moment,
            modified=moment,
            relationship=relationship,
            base_url="report:/attached",
        )


def _closed(files: Mapping[str, tuple[str, bytes]]) -> Any:
    """Return a fetcher that knows these files and nothing else: no disk, no network."""
    from weasyprint.urls import FatalURLFetchingError, URLFetcher, URLFetcherResponse  # noqa: PLC0415 - heavy

    class Closed(URLFetcher):  # type: ignore[misc]  # the library publishes no types
        def __init__(self) -> None:
            super().__init__(allowed_protocols=["report"])

        def fetch(self, url: str, headers: Any = None) -> Any:  # noqa: ARG002 - the library's form
            if url not in files:
                msg = f"the report asks for {url[:80]!r}, which is none of its files"
                raise FatalURLFetchingError(msg)
            kind, data = files[url]
            return URLFetcherResponse(url, data, {"Content-Type": kind})

    return Closed()


@cache
def _fonts() -> Any:
    """Return the renderer's fonts, one and the same for all reports of a process.

    The renderer never gives back 0.2 MB of each: 2000 reports would take 500 MB. It keeps our fonts in a folder of its
    own, which goes when the process ends, a worker's too.
    """
    from weasyprint.text.fonts import FontConfiguration  # noqa: PLC0415 - heavy

    fonts = FontConfiguration()
    Finalize(None, _tidy, (fonts,), exitpriority=0)
    return fonts


def _tidy(fonts: Any) -> None:
    """Remove the renderer's folder of fonts while the libraries are still there that do it, and not a second time."""
    fonts.__del__()
    fonts._folder = None  # noqa: SLF001 - else the renderer tries again when nothing is there any more, and complains


def _font(name: str) -> bytes:
    return (folder("templates") / "fonts" / name).read_bytes()


@contextmanager
def _no_missing_glyph() -> Iterator[None]:
    """Turn the renderer's warnings about missing glyphs into an error that names the characters."""
    found: list[str] = []

    class Listen(logging.Handler):
        def emit(self, record: logging.LogRecord) -> None:
            text = record.getMessage()
            if ".notdef" in text:
                found.append(text)

    logger, listen = logging.getLogger("weasyprint"), Listen(logging.WARNING)
    kept = logger.handlers[:], logger.propagate
    logger.handlers, logger.propagate = [listen], False
    try:
        yield
    finally:
        logger.handlers, logger.propagate = kept
    if found:
        points = dict.fromkeys(re.findall(r"\(U\+([0-9A-F]+)\)", "\n".join(found)))
        characters = ", ".join(f"{chr(int(point, 16))!r} (U+{point})" for point in [*points][:5]) or found[0]
        raise UsageError(
            f"the report's fonts lack: {characters}",
            allowed="Latin, Greek, Cyrillic, Arabic, Hebrew and mathematical characters",
            next_step="write the name or text in the spec with other characters",
        )


@cache
def _need_a_system_font() -> None:
    """Refuse to start where the text engine would crash: it needs one system font even if it never uses it."""
    import cffi  # noqa: PLC0415 - comes with the renderer

    ffi = cffi.FFI()
    ffi.cdef(
        "typedef struct { int nfont; int sfont; void *fonts; } FcFontSet; FcFontSet *FcConfigGetFonts(void *, int);"
    )
    ffi.cdef("int FcInit(void);")
    try:
        library = ffi.dlopen("libfontconfig.so.1")
    except OSError:
        return  # another system: its own text engine brings its fonts
    library.FcInit()
    fonts = library.FcConfigGetFonts(ffi.NULL, 0)
    if fonts == ffi.NULL or fonts.nfont == 0:
        raise UsageError("the system has no font at all", next_step="install one, e.g. the package fonts-dejavu-core")
