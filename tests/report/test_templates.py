"""Templates put finished text into place and do nothing else; their colours can be read, their words claim nothing."""

import re
from itertools import product
from pathlib import Path

import pytest
from jinja2 import Environment, StrictUndefined, nodes
from jinja2.exceptions import UndefinedError

from runner.commands import regions_page
from runner.report import drawing
from runner.report.page import EDITION, environment
from runner.resources import folder

TEMPLATES = sorted(folder("templates").rglob("*.html"))
HERE = folder("templates") / EDITION
ALLOWED = (nodes.Template, nodes.Output, nodes.TemplateData, nodes.Name, nodes.Getattr, nodes.For, nodes.If)
"""Text, names, their parts, loops over them, and whether there is something: all that a template may use."""
SHAPE = (nodes.Tuple, nodes.Include, nodes.Const, nodes.Filter)
"""Also: several loop names at once, another template by its fixed name, and the filters below."""
FILTERS = {"css", "drawing", "place"}
"""They mark the program's own style and drawings as such, and turn a picture's name into its address."""


def _tree(template: Path) -> nodes.Template:
    return Environment(autoescape=True).parse(template.read_text(encoding="utf-8"))


@pytest.mark.parametrize("template", TEMPLATES, ids=lambda p: p.relative_to(folder("templates")).as_posix())
def test_a_template_neither_compares_nor_computes_nor_calls(template: Path) -> None:
    """The syntax tree holds text, names, loops and plain truth only; filters are those of the list."""
    for node in _walk(_tree(template)):
        assert isinstance(node, ALLOWED + SHAPE), f"{template.name}:{node.lineno}: {type(node).__name__}"
        if isinstance(node, nodes.Filter):
            assert node.name in FILTERS, f"{template.name}:{node.lineno}: {node.name}"
            assert [node.args, node.kwargs, node.dyn_args, node.dyn_kwargs] == [[], [], None, None]
        if isinstance(node, nodes.If):
            assert isinstance(node.test, (nodes.Name, nodes.Getattr)), f"{template.name}:{node.lineno}"
        if isinstance(node, nodes.For):
            assert isinstance(node.iter, (nodes.Name, nodes.Getattr))
            assert node.test is None
            assert not node.recursive
        if isinstance(node, nodes.Include):
            assert isinstance(node.template, nodes.Const)
            assert (template.parent / str(node.template.value)).is_file()
        if isinstance(node, nodes.Const):
            assert node.value == "body.html"


@pytest.mark.parametrize(
    "line",
    [
        "{% if r.value > r.limit %}x{% endif %}",
        "{{ r.value + 1 }}",
        "{{ r.value|round(2) }}",
        "{{ r.show() }}",
        "{% set x = 1 %}",
        "{% if not r.value %}x{% endif %}",
        "{% if r.value is defined %}x{% endif %}",
        "{{ r['value'] }}",
        "{{ 'a' if r.value else 'b' }}",
        "{{ r.value|safe }}",
    ],
)
def test_the_walk_above_would_see_it(line: str) -> None:
    """Each kind of computing in a template is something that the rule above refuses."""
    assert [
        node
        for node in _walk(Environment(autoescape=True).parse(line))
        if not isinstance(node, ALLOWED + SHAPE) or (isinstance(node, nodes.Filter) and node.name not in FILTERS)
    ]


def test_text_is_escaped_and_unknown_names_are_errors() -> None:
    """The pages' environment escapes what it puts in and never prints nothing for a name that it does not know."""
    templates = environment()

    assert templates.from_string("{{ x }}").render(x="<b>&\"'") == "&lt;b&gt;&amp;&#34;&#39;"
    assert templates.undefined is StrictUndefined
    with pytest.raises(UndefinedError, match="'x' is undefined"):
        templates.from_string("{{ x }}").render()
    with pytest.raises(UndefinedError, match="has no attribute 'y'"):
        templates.from_string("{% if x.y %}{% endif %}").render(x=templates)
    assert "autoescape=True, undefined=StrictUndefined" in Path(regions_page.__file__).read_text(encoding="utf-8")


@pytest.mark.parametrize("file", [*TEMPLATES, *HERE.glob("*.css")], ids=lambda p: p.name)
def test_no_page_claims_to_be_a_certificate(file: Path) -> None:
    """A test report is signed and closed to changes; it certifies nothing (ISO/IEC 17025:2017, 7.8.2)."""
    words = file.read_text(encoding="utf-8").lower()

    assert not re.search(r"certif|approv|guarantee|accredit", words)


@pytest.mark.parametrize("template", TEMPLATES, ids=lambda p: p.name)
def test_the_programs_name_is_never_near_a_verdict(template: Path) -> None:
    """It stands in no heading and in no line with a verdict: only in the command that checks the report."""
    lines = [line for line in template.read_text(encoding="utf-8").splitlines() if "probatum" in line.lower()]

    assert all("<code>probatum verify report.pdf</code>" in line for line in lines)
    assert not [line for line in lines if re.search(r"verdict|word|<h\d|<title", line)]


def _luminance(colour: str) -> float:
    """Relative luminance (WCAG 2.2, definition)."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    red, green, blue = (p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def _contrast(one: str, other: str) -> float:
    light, dark = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def test_the_contrast_formula_gives_known_values() -> None:
    """Black on white is 21; #767676 is the lightest grey of 4.5 on white (WCAG 2.2, 1.4.3 and its techniques)."""
    assert _contrast("#000000", "#ffffff") == pytest.approx(21)
    assert _contrast("#767676", "#ffffff") > 4.5 > _contrast("#777777", "#ffffff")


def _variables(dark: bool) -> dict[str, str]:
    style = (HERE / "screen.css").read_text(encoding="utf-8")
    blocks = re.findall(r":root \{([^}]*)\}", style)
    assert len(blocks) == 2
    return dict(re.findall(r"--([\w-]+): (#[0-9a-f]{6});", blocks[1 if dark else 0]))


@pytest.mark.parametrize("dark", [False, True], ids=["light", "dark"])
def test_screen_colours_can_be_read(dark: bool) -> None:
    """Words keep 4.5:1 on their ground, lines and shapes 3:1 (WCAG 2.2, 1.4.3 and 1.4.11), light and dark."""
    c = _variables(dark)
    words = {"ink", "faint", "ok", "no", "open", "again", "curve"}
    areas = {"rule", "ground", "zone", "band", "note"}

    assert {name: _contrast(c[name], c["ground"]) for name in words if _contrast(c[name], c["ground"]) < 4.5} == {}
    assert _contrast(c["note-ink"], c["note"]) >= 4.5
    shapes = {*words, "mark"}
    assert {(a, b) for a, b in product(shapes, ("ground", "zone")) if _contrast(c[a], c[b]) < 3} == set()
    assert _contrast(c["curve"], c["band"]) >= 3, "the curve in its band"
    assert words | areas | {"mark", "note-ink"} == set(c), "every colour is looked at"


def test_every_colour_of_the_screen_comes_from_its_list() -> None:
    """No rule brings in a colour that the dark screen would not change, and no name is unknown."""
    style = re.sub(r":root \{[^}]*\}", "", (HERE / "screen.css").read_text(encoding="utf-8"))

    assert re.findall(r"#[0-9a-f]{3,8}\b|\b(?:white|black|gr[ae]y)\b(?!-)", style) == []
    assert set(re.findall(r"var\(--([\w-]+)\)", style)) <= set(_variables(dark=False)) == set(_variables(dark=True))


def test_paper_colours_can_be_read() -> None:
    """Words on white paper, in the band and in drawings keep 4.5:1; verdicts have the same colours in both."""
    style = (HERE / "paper.css").read_text(encoding="utf-8")
    inks = re.findall(r"[{;]\s*color: (#[0-9a-f]{6})", style)
    band = re.search(r"\.band \{[^}]*background: (#[0-9a-f]{6}); color: (#[0-9a-f]{6})", style)
    drawn = [drawing.INK, drawing.FAINT, drawing.LINE, drawing.MARK, *drawing.COLOURS.values()]

    assert len(inks) >= 10
    assert {ink: _contrast(ink, "#ffffff") for ink in [*inks, *drawn] if _contrast(ink, "#ffffff") < 4.5} == {}
    assert band is not None
    assert _contrast(*band.groups()) >= 4.5
    for word, colour in drawing.COLOURS.items():
        rule = re.search(rf"\.c-{drawing.slug(word)} {{ color: (#[0-9a-f]{{6}})", style)
        assert word == "report only" or (rule is not None and rule[1] == colour)


def _walk(tree: nodes.Node) -> list[nodes.Node]:
    return [tree, *(below for child in tree.iter_child_nodes() for below in _walk(child))]
