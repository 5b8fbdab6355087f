"""A page taken apart by the standard library's parser, which also says where it is not well formed."""

from dataclasses import dataclass, field
from html.parser import HTMLParser

VOID = {"meta", "link", "img", "br", "hr", "input", "col", "wbr"}


@dataclass
class Element:
    """One element, with all the text inside it."""

    tag: str
    attributes: dict[str, str]
    text: str = ""
    inside: "list[Element]" = field(default_factory=list)


class Page(HTMLParser):
    """All elements in order; `wrong` holds what is not well formed."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[Element] = []
        self.wrong: list[str] = []
        self._open: list[Element] = []
        self.feed(text)
        self.close()
        self.wrong += [f"<{one.tag}> is never closed" for one in self._open]

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        if len(set(names)) != len(names):
            self.wrong.append(f"<{tag}> repeats an attribute: {names}")
        element = Element(tag, {name: value or "" for name, value in attrs})
        self.elements.append(element)
        for one in self._open:
            one.inside.append(element)
        if tag not in VOID:
            self._open.append(element)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.handle_endtag(tag)

    def handle_endtag(self, tag: str) -> None:
        if not self._open or self._open[-1].tag != tag:
            self.wrong.append(f"</{tag}> closes {self._open[-1].tag if self._open else 'nothing'}")
            return
        self._open.pop()

    def handle_data(self, data: str) -> None:
        for one in self._open:
            one.text += data

    def of(self, tag: str) -> list[Element]:
        """All elements of a kind."""
        return [one for one in self.elements if one.tag == tag]

    def identified(self, identifier: str) -> Element:
        """The element with this identifier."""
        (found,) = (one for one in self.elements if one.attributes.get("id") == identifier)
        return found


def plain(element: Element) -> str:
    """Its text with every run of white space as one space."""
    return " ".join(element.text.split())
