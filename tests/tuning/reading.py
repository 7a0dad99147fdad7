"""A page of HTML taken apart: what the report's tests look for in it."""

from __future__ import annotations

from dataclasses import dataclass, field
from html.parser import HTMLParser

VOID = {"meta", "br", "img", "input", "link", "hr"}


@dataclass
class Element:
    """An element with its attributes, its children, and the text directly in it."""

    tag: str
    attributes: dict[str, str]
    parts: list[Element | str] = field(default_factory=list)

    def text(self) -> str:
        """All text in it, spaces as one."""
        whole = "".join(p if isinstance(p, str) else f" {p.text()} " for p in self.parts)
        return " ".join(whole.split())

    def all(self, tag: str = "", kind: str = "") -> list[Element]:
        """Every element below of a tag and a class, in order."""
        found = []
        for part in self.parts:
            if isinstance(part, Element):
                classes = part.attributes.get("class", "").split()
                if tag in ("", part.tag) and (not kind or kind in classes):
                    found.append(part)
                found += part.all(tag, kind)
        return found

    def one(self, name: str) -> Element:
        """The element below of an id."""
        (found,) = (e for e in self.all() if e.attributes.get("id") == name)
        return found


def parsed(page: str) -> Element:
    """The page as a tree; raises where its tags do not close in order."""
    reader = _Reader()
    reader.feed(page)
    reader.close()
    assert [element.tag for element in reader.open] == ["page"], "an element stays open"
    return reader.open[0]


class _Reader(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.open = [Element("page", {})]

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        element = Element(tag, {key: value or "" for key, value in attrs})
        self.open[-1].parts.append(element)
        if tag not in VOID:
            self.open.append(element)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        element = Element(tag, {key: value or "" for key, value in attrs})
        self.open[-1].parts.append(element)

    def handle_endtag(self, tag: str) -> None:
        if tag not in VOID:
            assert self.open[-1].tag == tag, f"</{tag}> closes <{self.open[-1].tag}>"
            self.open.pop()

    def handle_data(self, data: str) -> None:
        self.open[-1].parts.append(data)
