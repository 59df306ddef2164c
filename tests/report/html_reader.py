"""Reads an HTML page into its tags and words, for tests on both."""

from html.parser import HTMLParser

VOID = {"meta", "br", "img", "col", "link", "input", "hr", "path", "circle", "rect"}


class Page(HTMLParser):
    """Everything that the tests ask of a page: tags with attributes, the words in them, how they nest."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str]]] = []
        self.words: dict[str, list[str]] = {}
        self.open: list[str] = []
        self.wrong: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Keep a tag."""
        self.tags.append((tag, {key: value or "" for key, value in attrs}))
        self.words.setdefault(tag, []).append("")
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Keep an empty tag."""
        self.tags.append((tag, {key: value or "" for key, value in attrs}))

    def handle_endtag(self, tag: str) -> None:
        """Note an end that fits no begin."""
        if not self.open or self.open.pop() != tag:
            self.wrong.append(tag)

    def handle_data(self, data: str) -> None:
        """Keep words under every tag that is open."""
        for tag in set(self.open):
            self.words[tag][-1] += data

    def all(self, tag: str) -> list[dict[str, str]]:
        """Return the attributes of all tags of a name."""
        return [attributes for name, attributes in self.tags if name == tag]
