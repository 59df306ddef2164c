"""The report as HTML: one self-contained file for screens, and the page that is printed as PDF."""

import base64
import re
from collections.abc import Mapping
from functools import cache
from typing import Any

from markupsafe import Markup

from runner.report.facts import Report, report_facts
from runner.report.paper_drawing import from_the_left
from runner.resources import folder

EDITION = "1"
"""Folder of the templates; older editions are kept, so that older reports can be compared."""


def html_page(document: Mapping[str, Any], pictures: Mapping[str, bytes]) -> str:
    """Return a unit's report as one self-contained HTML file: no script, nothing loaded from elsewhere.

    Args:
        document: The results.
        pictures: PNG by name.
    """
    facts = report_facts(document)
    shown = dict(pictures) | {area.name: area.png for area in facts.maps}

    def place(name: str) -> str:
        return "data:image/png;base64," + base64.b64encode(shown[name]).decode()

    return _render("screen", facts, document, place=place, drawing=inline)


def paper_page(document: Mapping[str, Any]) -> tuple[str, dict[str, bytes]]:
    """Return the page that is printed, and its drawings and maps by address; pictures and fonts are only named.

    Drawings stand in files of their own on paper: as part of the page their every stroke would be styled like text,
    which takes a third of the printing time.

    Args:
        document: The results.
    """
    facts = report_facts(document)
    drawings = {f"report:/pictures/{area.name}": area.png for area in facts.maps}

    def drawing(svg: str) -> str:
        data = from_the_left(svg).encode()
        address = next((known for known, other in drawings.items() if other == data), "")
        if not address:
            address = f"report:/drawings/{len(drawings) + 1}.svg"
            drawings[address] = data
        words = re.search(r'aria-label="([^"]*)"', svg)
        return Markup(f'<img src="{address}" alt="{words[1] if words else ""}">')  # noqa: S704 - words are escaped

    return _render("paper", facts, document, place=lambda name: f"report:/pictures/{name}", drawing=drawing), drawings


def inline(svg: str) -> str:
    """Put a drawing into the page itself, where it follows the page's colours."""
    return Markup(svg)  # noqa: S704 - made by `drawing`, which escapes every word


@cache
def environment() -> Any:
    """Return the template environment: escaping on, unknown names are errors.

    Made once: reading the templates takes a tenth of a page's time. What two filters do differs from page to page, so a
    page gives them to `render`: `drawing` puts an SVG text into its place, `place` gives a picture's address.
    """
    from jinja2 import Environment, FileSystemLoader, StrictUndefined, pass_context  # noqa: PLC0415 - heavy

    @pass_context
    def place(context: Any, name: str) -> Any:
        return context["place"](name)

    @pass_context
    def drawing(context: Any, svg: str) -> Any:
        return context["drawing"](svg)

    templates = Environment(
        loader=FileSystemLoader(folder("templates") / EDITION),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        keep_trailing_newline=True,
    )
    # style sheets are the program's own
    templates.filters |= {"css": Markup, "place": place, "drawing": drawing}
    return templates


def _render(kind: str, facts: Report, document: Mapping[str, Any], **more: Any) -> str:
    style = (folder("templates") / EDITION / f"{kind}.css").read_text(encoding="utf-8")
    template = environment().get_template(f"{kind}.html")
    return str(template.render(r=facts, style=style, created=document["time"], **more))
