"""A page read as a tree, with the standard library only: enough for tests of structure and of visible words."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from html.parser import HTMLParser

VOID = {"meta", "link", "br", "hr", "img", "input", "col", "base"}


@dataclass
class Node:
    """An element with its children in order; a child that is text is a string."""

    tag: str
    attrs: dict[str, str] = field(default_factory=dict)
    children: list[Node | str] = field(default_factory=list)

    def walk(self) -> Iterator[Node]:
        """This element and all below, in reading order."""
        yield self
        for child in self.children:
            if isinstance(child, Node):
                yield from child.walk()

    def all(self, *tags: str) -> list[Node]:
        """Every element of these tags."""
        return [node for node in self.walk() if node.tag in tags]

    def text(self, skip: tuple[str, ...] = ("style",), skip_class: str = "") -> str:
        """The words inside, without those of some tags or of a class."""
        parts = []
        for child in self.children:
            if isinstance(child, str):
                parts.append(child)
            elif child.tag not in skip and not (skip_class and skip_class in child.attrs.get("class", "").split()):
                parts.append(child.text(skip, skip_class))
        return " ".join(" ".join(parts).split())


class _Builder(HTMLParser):
    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.root = Node("document")
        self.open = [self.root]
        self.faults: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        node = Node(tag, {name: value or "" for name, value in attrs})
        if len({name for name, _ in attrs}) != len(attrs):
            self.faults.append(f"{tag} has an attribute twice")
        self.open[-1].children.append(node)
        if tag not in VOID:
            self.open.append(node)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.open[-1].children.append(Node(tag, {name: value or "" for name, value in attrs}))

    def handle_endtag(self, tag: str) -> None:
        if self.open[-1].tag != tag:
            self.faults.append(f"</{tag}> closes <{self.open[-1].tag}>")
        else:
            self.open.pop()

    def handle_data(self, data: str) -> None:
        self.open[-1].children.append(data)


def parse(html: str) -> Node:
    """The page as a tree; badly nested elements are an error."""
    builder = _Builder()
    builder.feed(html)
    builder.close()
    assert not builder.faults, builder.faults[:5]
    assert builder.open == [builder.root], [node.tag for node in builder.open]
    return builder.root
