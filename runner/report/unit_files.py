"""All files of one unit's report, as bytes by path, ready to be written whole."""

from collections.abc import Mapping
from datetime import UTC, datetime
from typing import Any

from runner.report import store
from runner.report.document import canonical, parse
from runner.report.keys import StationKey
from runner.report.page import html_page
from runner.report.pdf import render_pdf
from runner.report.sign import sign_detached, sign_pdf


def unit_files(
    document: Mapping[str, Any],
    pictures: Mapping[str, bytes],
    key: StationKey,
    tracebacks: list[str],
    timestamp_url: str | None = None,
) -> dict[str, bytes]:
    """Return results, pages, signatures and pictures of one unit.

    Args:
        document: The results.
        pictures: PNG by name, exactly those that the document lists.
        key: Signs the pages.
        tracebacks: The program's own faults, written beside the report for whoever mends them.
        timestamp_url: RFC 3161 server, or None.

    Raises:
        SigningError: The key or the time stamp server does not serve.
    """
    results = canonical(document)
    read_back = parse(results)  # pages show what the file holds, in the file's order, as everyone else will read it
    html = html_page(read_back, pictures).encode()
    pdf = render_pdf(read_back, pictures, results)
    now = datetime.now(UTC)
    files = {
        store.RESULTS: results,
        store.HTML: html,
        store.HTML_SIGNATURE: sign_detached(html, key, time=now, timestamp_url=timestamp_url),
        store.PDF: sign_pdf(pdf, key, time=now, timestamp_url=timestamp_url),
    }
    files |= {f"{store.PICTURES}/{name}": data for name, data in pictures.items()}
    if tracebacks:
        files["fault.txt"] = "\n\n".join(tracebacks).encode()
    return files
