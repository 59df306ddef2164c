"""Compares pages by what they show, where their bytes differ: words of a PDF, words and tags of an HTML page.

It is the weaker way: what lies over or under the words, and what a drawing shows, is not seen.
"""

import re
from collections import Counter
from collections.abc import Sequence
from enum import Enum
from html.parser import HTMLParser
from io import BytesIO

from runner.judge.verdict import VERDICTS
from runner.report.verify_pdf import quiet

_RUNNING = re.compile(r"^.*\bpage \d+ of \d+$", re.MULTILINE)
_DECIMAL = re.compile(r"[-−]?\d+\.\d+")
_VERDICT_WORDS = frozenset(" ".join(VERDICTS).split())
_BULLET = "•"
"""Marks of lists stand beside whatever word their line happens to follow."""
_SHOWN = 6
"""Words shown of a difference."""


class Order(Enum):
    """How the words of two pages agree."""

    SAME = "the same words in the same order"
    OTHER = "the same words in another order, as where pages break elsewhere"


def pdf_text(data: bytes) -> str:
    """Return the text of a PDF in the order of its drawing, white space as found."""
    from pypdf import PdfReader  # noqa: PLC0415 - heavy, and rarely needed

    with quiet():
        return "\n".join(page.extract_text() for page in PdfReader(BytesIO(data)).pages)


def compare_pdf(stated: str, again: str) -> Order | str:
    """Tell how the texts of two PDFs agree, or in a few words how they do not.

    White space is left out, because lines break elsewhere in another version of the printer. Where pages do, too,
    text moves as a whole (drawings and columns are drawn at other turns) and heads of tables come again: then, the line
    at the foot of the page apart, each word of either side must occur on the other, and numbers and the words of
    verdicts as often; a word broken at a line's end counts by its parts.

    Args:
        stated: Text of the report.
        again: Text of the page printed again.
    """
    if _joined(stated) == _joined(again):
        return Order.SAME
    stated, again = (_RUNNING.sub("", text).replace(_BULLET, " ") for text in (stated, again))
    more, less = _foreign(stated, again), _foreign(again, stated)
    if more or less:
        return _difference(more, less)
    return Order.OTHER


def compare_html(stated: bytes, again: bytes) -> Order | str:
    """Tell that two HTML pages have the same tags, attributes and words in the same order, or how they do not.

    Nothing but white space between words may differ: a browser sets the lines.

    Args:
        stated: The report.
        again: The page printed again.
    """
    one, other = _pieces(stated), _pieces(again)
    if one == other:
        return Order.SAME
    place = next((n for n, (a, b) in enumerate(zip(one, other, strict=False)) if a != b), min(len(one), len(other)))
    return _difference(one[place:], other[place:])


def _joined(text: str) -> str:
    return "".join(text.split())


def _foreign(text: str, other: str) -> list[str]:
    """Return the words of a text that another lacks, or has less often where that weighs."""
    here, there = Counter(text.split()), Counter(other.split())
    known = _joined(other).replace("-", "")  # a hyphen may show only where a line ends

    def lacks(word: str) -> bool:
        if word.replace("-", "") not in known:
            return True
        weighs = word.lower().strip(".,;:") in _VERDICT_WORDS or _DECIMAL.fullmatch(word) is not None
        return weighs and here[word] > there[word]

    return [word for word in here if lacks(word)]


def _difference(more: Sequence[str], less: Sequence[str]) -> str:
    return f"it shows {_some(more)} where the data give {_some(less)}"


def _some(words: Sequence[str]) -> str:
    shown = [word if len(word) <= 60 else word[:57] + "…" for word in words[:_SHOWN]]
    return "'" + " ".join(shown) + (" …" if len(words) > len(shown) else "") + "'" if shown else "nothing"


def _pieces(data: bytes) -> list[str]:
    pieces = _Pieces()
    pieces.feed(data.decode("utf-8"))
    pieces.close()
    return pieces.found


class _Pieces(HTMLParser):
    """Collects words, and every tag, attribute, comment and declaration, each so marked that none passes for another.

    Pictures are among them: they stand in the page's attributes whole.
    """

    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Keep a tag with its attributes."""
        self.found += [f"<{tag}>", *(f"<{tag} {key}={value!r}>" for key, value in attrs)]

    def handle_endtag(self, tag: str) -> None:
        """Keep where a tag ends."""
        self.found.append(f"</{tag}>")

    def handle_data(self, data: str) -> None:
        """Keep words; one that looks like a tag is marked by its doubled bracket."""
        self.found += [word.replace("<", "<<") for word in data.split()]

    def handle_comment(self, data: str) -> None:
        """Keep comments, too."""
        self.found.append(f"<!--{data}-->")

    def handle_decl(self, decl: str) -> None:
        """Keep the document's kind."""
        self.found.append(f"<!{decl}>")

    def handle_pi(self, data: str) -> None:
        """Keep processing instructions."""
        self.found.append(f"<?{data}>")

    def unknown_decl(self, data: str) -> None:
        """Keep anything else that is marked."""
        self.found.append(f"<![{data}]>")
