"""What a page of HTML holds, by the parser of the standard library."""

from __future__ import annotations

import re
from html.parser import HTMLParser

VOID = {"meta", "link", "br", "hr", "img", "input"}


class Page(HTMLParser):
    """Tags with their attributes, texts, ids, numbers in ``data`` elements; ``faults`` of the nesting."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str]]] = []
        self.open: list[str] = []
        self.faults: list[str] = []
        self.texts: list[tuple[str, str]] = []
        self.text = text
        self.feed(text)
        self.close()
        self.faults += [f"{tag} is not closed" for tag in self.open]

    def handle_starttag(self, tag, attributes):
        names = [name for name, _ in attributes]
        if len(set(names)) < len(names):
            self.faults.append(f"{tag} has an attribute twice: {names}")
        self.tags.append((tag, {name: value or "" for name, value in attributes}))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.handle_starttag(tag, attributes)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag):
        if not self.open or self.open[-1] != tag:
            self.faults.append(f"</{tag}> within {self.open[-3:]}")
        else:
            self.open.pop()

    def handle_data(self, data):
        if self.open:
            self.texts.append((self.open[-1], data))

    def of(self, tag: str) -> list[dict[str, str]]:
        """Attributes of every such tag."""
        return [attributes for name, attributes in self.tags if name == tag]

    def said(self, tag: str) -> list[str]:
        """Texts directly within such tags."""
        return [text for name, text in self.texts if name == tag]

    @property
    def ids(self) -> list[str]:
        return [attributes["id"] for _, attributes in self.tags if "id" in attributes]

    @property
    def numbers(self) -> set[float]:
        """Whole numbers behind what tables show."""
        return {float(attributes["value"]) for attributes in self.of("data")}

    @property
    def addresses(self) -> list[str]:
        """All that the page points to or loads."""
        out = [
            value
            for _, attributes in self.tags
            for name, value in attributes.items()
            if name in ("href", "src", "srcset", "xlink:href", "action", "poster")
        ]
        return (
            out
            + re.findall(r"url\(\s*['\"]?([^)'\"]*)", self.text)
            + re.findall(r"@import\s+(\S+)", self.text)
        )
