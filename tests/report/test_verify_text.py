"""Where bytes differ, the text of a page is compared: in order, and by words where whole parts moved."""

import pytest

from runner.report import verify_text
from runner.report.verify_text import Order
from tests.report import signed_world as world

PAGE = b"<p>lower <b>left</b></p><p>0.187 <i>conforms</i></p><p>0.250 <i>does not conform</i></p>"
TEXT = "lower left 0.187 conforms\nupper right 0.250 does not conform\npage 1 of 2"


def test_the_text_of_a_pdf_is_what_was_printed() -> None:
    """Every word printed comes out of the PDF again, in order."""
    pdf = world.print_pdf("<p>lower left corner:</p><p>0.187 ± 0.003 cy/px</p>", {}, b"{}\n")

    assert verify_text.pdf_text(pdf).split() == ["lower", "left", "corner:", "0.187", "±", "0.003", "cy/px"]


def test_lines_may_break_elsewhere() -> None:
    """White space of a PDF is the printer's, even within a word."""
    assert verify_text.compare_pdf(TEXT.replace(" ", "\n"), TEXT.replace("conforms", "con forms")) is Order.SAME


def test_parts_may_move_when_pages_break_elsewhere() -> None:
    """The same words in another order are told apart from the same order; page numbers do not count."""
    first, second, _ = TEXT.split("\n")

    assert verify_text.compare_pdf(f"{second}\nWS8-ACC / 1 page 1 of 3\n{first}", TEXT) is Order.OTHER
    assert verify_text.compare_pdf(f"{second}\nlower\n{first}", TEXT) is Order.OTHER


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("does not conform", "conforms", "'conforms' where the data give 'does not conform'"),
        ("0.250", "0.187", "'0.187' where the data give '0.250'"),
    ],
)
def test_numbers_and_verdicts_are_counted(old: str, new: str, words: str) -> None:
    """A verdict or value that stands elsewhere on the page is not free to stand here."""
    first, second, _ = (TEXT.replace(old, new) + "\n").split("\n", 2)
    more = "\nsummary: 0.250 does not conform"

    assert verify_text.compare_pdf(f"{second}\n{first}{more}", TEXT + more) == f"it shows {words}"


def test_a_word_broken_at_a_lines_end_is_the_same_word() -> None:
    """A soft hyphen shows where a line breaks, and long digests break anywhere."""
    whole = "Probability 2ed0612cbce380455508 b a"

    assert verify_text.compare_pdf("a b Proba-\nbility 2ed0612c\nbce380455508", whole) is Order.OTHER


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (TEXT.replace("0.187", "0.287"), "'0.287' where the data give '0.187'"),
        ("CONFORMS " + TEXT, "'CONFORMS' where the data give nothing"),
        (TEXT.replace("does not conform", ""), "nothing where the data give 'does not conform'"),
        ("", "nothing where the data give 'lower left 0.187 conforms upper right …'"),
    ],
)
def test_other_words_are_named(text: str, words: str) -> None:
    """A word that the data do not give, or one that is gone, is told."""
    assert verify_text.compare_pdf(text, TEXT) == f"it shows {words}"


def test_white_space_of_a_page_may_differ() -> None:
    """Between the words of an HTML page only white space may differ: a browser sets the lines."""
    assert verify_text.compare_html(PAGE.replace(b"<p>", b"\n  <p>\n").replace(b" ", b"\n"), PAGE) is Order.SAME


@pytest.mark.parametrize(
    "other",
    [
        PAGE.replace(b"does not conform", b"X").replace(b"conforms", b"does not conform").replace(b"X", b"conforms"),
        PAGE.replace(b"0.187", b"0.250", 1),
        PAGE.replace(b"<b>left", b"<b hidden>left"),
        PAGE.replace(b"<b>", b"<!-- X --><b>"),
        PAGE.replace(b"left</b></p>", b"left</p></b>"),
        PAGE.replace(b"<b>", b"&lt;b&gt;"),
        PAGE + b'<img src="data:image/png;base64,AA">',
        b"<!doctype html>" + PAGE,
        b"<?x y>" + PAGE,
        PAGE[:-30],
    ],
)
def test_anything_else_of_a_page_counts(other: bytes) -> None:
    """Swapped verdicts, a hidden word, a comment, a picture, a moved end: each is another page."""
    assert other != PAGE
    assert str(verify_text.compare_html(other, PAGE)).startswith("it shows ")


def test_a_picture_in_the_page_counts() -> None:
    """Pictures stand in the page; another one is found, and the sentence stays short."""
    one, two = (b'<img src="data:image/png;base64,' + 99 * c + b'">' for c in (b"A", b"B"))

    found = verify_text.compare_html(one, two)

    assert isinstance(found, str)
    assert len(found) < 200
