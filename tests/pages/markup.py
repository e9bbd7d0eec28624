"""HTML read strictly, as a tree: what is opened is closed, in order, with no name twice."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from html.parser import HTMLParser

VOID = {"area", "base", "br", "col", "embed", "hr", "img", "input", "link", "meta", "source", "track", "wbr"}
INSIDE_A_LINE = {"a", "abbr", "b", "code", "em", "i", "small", "span", "strong", "time"}


@dataclass
class Element:
    """One element with what stands in it, in order."""

    tag: str
    attributes: dict[str, str | None]
    content: list[Element | str] = field(default_factory=list)

    @property
    def text(self) -> str:
        return " ".join("".join(self._texts()).split())

    def _texts(self) -> Iterator[str]:
        for part in self.content:
            yield from (part,) if isinstance(part, str) else part._texts()
        if self.tag not in INSIDE_A_LINE:
            yield " "

    def all(self, tag: str | None = None, **wanted: str) -> list[Element]:
        """Every element below, in order; `class_` matches one of the classes."""
        return [element for element in self._below() if element._is(tag, wanted)]

    def one(self, tag: str | None = None, **wanted: str) -> Element:
        found = self.all(tag, **wanted)
        assert len(found) == 1, f"{len(found)} of {tag} {wanted}"
        return found[0]

    def get(self, name: str) -> str:
        return self.attributes.get(name) or ""

    def _below(self) -> Iterator[Element]:
        for part in self.content:
            if isinstance(part, Element):
                yield part
                yield from part._below()

    def _is(self, tag: str | None, wanted: dict[str, str]) -> bool:
        if tag and self.tag != tag:
            return False
        plain = {name.rstrip("_").replace("_", "-"): value for name, value in wanted.items()}
        classes = plain.pop("class", None)
        if classes and classes not in self.get("class").split():
            return False
        return all(self.attributes.get(name) == value for name, value in plain.items())


class _Reader(HTMLParser):
    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.open = [Element("", {})]

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        assert len(names) == len(set(names)), f"an attribute twice in <{tag} {names}>"
        element = Element(tag, dict(attrs))
        self.open[-1].content.append(element)
        if tag not in VOID:
            self.open.append(element)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.open[-1].content.append(Element(tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open[-1].tag == tag, f"</{tag}> closes <{self.open[-1].tag}> near {self.getpos()}"
        self.open.pop()

    def handle_data(self, data: str) -> None:
        self.open[-1].content.append(data)


def read(html: str) -> Element:
    """Read a page. Fails where an element is not closed, or closed in the wrong order."""
    reader = _Reader()
    reader.feed(html)
    reader.close()
    assert len(reader.open) == 1, f"<{reader.open[-1].tag}> is never closed"
    return reader.open[0]
