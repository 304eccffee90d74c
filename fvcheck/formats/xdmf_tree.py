"""The light data of an XDMF file: its XML elements, read with bounds, and references among them."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from xml.parsers import expat

from fvcheck.errors import FormatError

_MAX_DEPTH = 30
_MAX_ELEMENTS = 1_000_000


@dataclass(eq=False)
class Element:
    """An XML element: tag, attributes, children, and the pieces of its text."""

    tag: str
    attributes: dict[str, str]
    line: int
    children: list[Element] = field(default_factory=list)
    pieces: list[str] = field(default_factory=list)

    @property
    def text(self) -> str:
        """The text, without that of the children."""
        return "".join(self.pieces)

    def get(self, *names: str, default: str = "") -> str:
        """The first of the attributes ``names`` that is there, stripped; case of the names ignored."""
        lower = {name.lower(): value for name, value in self.attributes.items()}
        for name in names:
            if name.lower() in lower:
                return lower[name.lower()].strip()
        return default

    def all(self, tag: str) -> list[Element]:
        """The children with this tag."""
        return [child for child in self.children if child.tag == tag]


def parse(path: Path) -> Element:
    """The root element, with includes and references inside the file put in place.

    Raises `FormatError` for damaged XML, document types, entities, extreme
    depth, and anything included from another file.
    """
    parser = expat.ParserCreate()
    parser.buffer_text = True
    stack: list[Element] = []
    roots: list[Element] = []
    count = 0

    def refuse(what: str, mend: str = "") -> FormatError:
        return FormatError(what, where=f"{path}, line {parser.CurrentLineNumber}", mend=mend)

    def doctype(*_: object) -> None:
        raise refuse("a document type declaration is not accepted", "Write the values out, without entities.")

    def start(tag: str, attributes: dict[str, str]) -> None:
        nonlocal count
        count += 1
        if len(stack) >= _MAX_DEPTH:
            raise refuse(f"elements are nested more than {_MAX_DEPTH} deep")
        if count > _MAX_ELEMENTS:
            raise refuse(f"there are more than {_MAX_ELEMENTS} elements")
        element = Element(tag, dict(attributes), parser.CurrentLineNumber)
        (stack[-1].children if stack else roots).append(element)
        stack.append(element)

    def end(_: str) -> None:
        stack.pop()

    def text(data: str) -> None:
        if stack:
            stack[-1].pieces.append(data)

    parser.StartDoctypeDeclHandler = doctype
    parser.StartElementHandler = start
    parser.EndElementHandler = end
    parser.CharacterDataHandler = text
    try:
        with path.open("rb") as stream:
            parser.ParseFile(stream)
    except expat.ExpatError as error:
        raise FormatError(
            f"the XML is damaged: {expat.ErrorString(error.code)}",
            where=f"{path}, line {error.lineno}",
            mend="The file is damaged or incomplete; export it again.",
        ) from None
    except (OSError, ValueError, LookupError) as error:
        raise FormatError(f"the file cannot be read: {error}", where=path) from None
    root = roots[0]
    if root.tag != "Xdmf":
        raise FormatError(f"the root element is '{root.tag}', not 'Xdmf'", where=path)
    _resolve(root, root, path, set(), {})
    return root


def _resolve(
    element: Element, root: Element, path: Path, open_: set[int], done: dict[int, tuple[int, int]]
) -> tuple[int, int]:
    """Replace includes and references in an element by what they point at.

    Returns the number of elements and the depth that walking through it meets;
    few elements that refer to each other can stand for very many.
    """
    if id(element) in done:
        return done[id(element)]
    where = f"{path}, line {element.line}"
    if id(element) in open_:
        raise FormatError("references lead in a circle", where=where)
    if len(open_) > 2 * _MAX_DEPTH:
        raise FormatError("references are nested too deep", where=where)
    open_.add(id(element))
    children: list[Element] = []
    for child in element.children:
        if child.tag.rsplit(":", 1)[-1].lower() == "include":
            children += _included(child, root, path)
        elif reference := child.get("Reference"):
            children.append(_referenced(child, reference, root, path))
        else:
            children.append(child)
    met = [_resolve(child, root, path, open_, done) for child in children]
    element.children = children
    open_.discard(id(element))
    total = 1 + sum(size for size, _ in met)
    depth = 1 + max((below for _, below in met), default=0)
    if total > _MAX_ELEMENTS or depth > 2 * _MAX_DEPTH:
        raise FormatError("references stand for too many elements", where=where)
    done[id(element)] = total, depth
    return total, depth


def _included(element: Element, root: Element, path: Path) -> list[Element]:
    where = f"{path}, line {element.line}"
    if element.get("href"):
        raise FormatError(
            f"a part is included from another file ({element.get('href')})",
            where=where,
            mend="Put the included part into the file.",
        )
    pointer = element.get("xpointer")
    inner = re.fullmatch(r"xpointer\((.*)\)", pointer, re.DOTALL)
    found = list(_select(root, inner.group(1) if inner else "", where))
    if not found:
        raise FormatError(f"the include '{pointer}' points at nothing", where=where)
    return found


def _referenced(element: Element, reference: str, root: Element, path: Path) -> Element:
    where = f"{path}, line {element.line}"
    target = element.text.strip() if reference.upper() == "XML" else reference
    found = [other for other in _select(root, target, where) if other.tag == element.tag]
    if len(found) != 1 or found[0] is element:
        raise FormatError(f"the reference '{target}' points at {len(found)} elements", where=where)
    return found[0]


_STEP = re.compile(r"(/{1,2})([A-Za-z_*][\w.-]*|\*)((?:\[[^\]]*\])*)")
_SELF = re.compile(r"self::(\w+)")


def _select(root: Element, pointer: str, where: str) -> Iterator[Element]:
    """Elements a path points at: tags or ``*``, with [number], [@Name='…'] or [self::A or self::B]."""
    pointer = pointer.strip()
    if not pointer or "".join(m.group(0) for m in _STEP.finditer(pointer)) != pointer:
        raise FormatError(
            f"the reference '{pointer[:80]}' cannot be followed",
            where=where,
            mend="Write the element out in full.",
        )
    top = Element("", {}, 0, [root])
    found = [top]
    for slashes, tag, tests in _STEP.findall(pointer):
        following: list[Element] = []
        for element in found:
            parents = _within(element) if slashes == "//" else [element]
            for parent in parents:
                chosen = [child for child in parent.children if tag in ("*", child.tag)]
                for test in re.findall(r"\[([^\]]*)\]", tests):
                    chosen = _test(chosen, test.strip(), where)
                following += chosen
        found = list(dict.fromkeys(following))
    return iter(found)


def _within(element: Element) -> list[Element]:
    found, rest = [], [element]
    while rest:
        found.append(rest.pop())
        rest += reversed(found[-1].children)
    return found


def _test(elements: list[Element], test: str, where: str) -> list[Element]:
    if test.isdigit():
        return elements[int(test) - 1 : int(test)] if int(test) > 0 else []
    if match := re.fullmatch(r"@(\w+)\s*=\s*(?:\"([^\"]*)\"|'([^']*)')", test):
        value = match.group(2) if match.group(2) is not None else match.group(3)
        return [element for element in elements if element.attributes.get(match.group(1)) == value]
    tags = _SELF.findall(test)
    if tags and re.sub(r"self::\w+|\bor\b|\s", "", test) == "":
        return [element for element in elements if element.tag in tags]
    raise FormatError(f"the reference test '[{test[:60]}]' cannot be followed", where=where)
