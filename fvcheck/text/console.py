"""The page that texts are set on: 80 to 100 columns wide, coloured only in a terminal."""

from __future__ import annotations

import re
import shutil
import sys
import textwrap
from collections.abc import Iterable
from typing import Any

from rich.console import Console, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from fvcheck.hints import Hint
from fvcheck.verdict import CLOSED, MESH_LIMITED, OPEN, UNDECIDED

COLUMNS = 80

# Names from a file may hold codes that steer a terminal; only colours, which are ours, pass.
_CONTROL = re.compile(r"\x1b(?!\[[0-9;]*m)|[\x00-\x09\x0b-\x1a\x1c-\x1f\x7f-\x9f]")

STYLE = {CLOSED: "green", UNDECIDED: "yellow", MESH_LIMITED: "cyan", OPEN: "bold red"}
_MARK = {CLOSED: "✓", UNDECIDED: "?", MESH_LIMITED: "△", OPEN: "✗"}
_PLAIN_MARK = {CLOSED: "=", UNDECIDED: "?", MESH_LIMITED: "~", OPEN: "!"}


def rich_characters() -> bool:
    """Whether standard output can show more than ASCII."""
    try:
        "✓△✗●─·±‹›⁻³".encode(sys.stdout.encoding or "ascii")
    except (UnicodeEncodeError, LookupError):
        return False
    return True


def render(parts: Iterable[RenderableType]) -> str:
    """The parts one below the other, as the text to be written to standard output."""
    width = min(max(shutil.get_terminal_size((COLUMNS, 24)).columns, COLUMNS), 100)
    # Standard output decides on colour, together with NO_COLOR and TERM.
    console = Console(width=width, highlight=False, markup=False, emoji=False, soft_wrap=False)
    with console.capture() as caught:
        for part in parts:
            console.print(part)
    text = _CONTROL.sub("?", caught.get())
    return "\n".join(line.rstrip() for line in text.split("\n")).rstrip("\n") + "\n"


def marked(verdict: str) -> str:
    """The verdict with a mark before it, so that colour is not needed to see it."""
    return f"{(_MARK if rich_characters() else _PLAIN_MARK)[verdict]} {verdict}"


def verdict_text(verdict: str | None) -> Text:
    """The marked verdict in its colour; nothing for none."""
    return Text("") if verdict is None else Text(marked(verdict), style=STYLE[verdict])


def plain_table(*columns: str | tuple[str, dict[str, Any]]) -> Table:
    """A table without rules: bare headings, numbers to the right unless a column says otherwise."""
    table = Table(box=None, show_edge=False, pad_edge=False, padding=(0, 1, 0, 0), header_style="dim")
    for column in columns:
        title, settings = column if isinstance(column, tuple) else (column, {})
        look: dict[str, Any] = {"justify": "right", "no_wrap": True} | settings
        table.add_column(Text(title), **look)
    return table


LEFT: dict[str, Any] = {"justify": "left"}
FOLDED: dict[str, Any] = LEFT | {"overflow": "fold", "no_wrap": False}
"""Columns of words; those of names that may be long are folded."""


def heading(name: str, *facts: str) -> Text:
    """A name in bold, and what there is to say about it."""
    dot = "  ·  " if rich_characters() else "  -  "
    return Text.assemble((name, "bold"), (dot + dot.join(facts) if facts else "", ""))


def hint_lines(hints: Iterable[Hint]) -> list[RenderableType]:
    """``hint CODE: message``, continued lines indented."""
    return [paragraph(("hint ", "dim"), (f"{hint.code}: ", "cyan"), body=hint.message) for hint in hints]


def paragraph(*head: tuple[str, str], body: str, indent: int = 0, by: int = 2) -> RenderableType:
    """Styled words and a body as one paragraph, ``indent`` from the left, further lines ``by`` more."""
    words = "".join(word for word, _ in head) + body
    lines = textwrap.wrap(
        words, COLUMNS - indent, subsequent_indent=" " * by, break_long_words=False, break_on_hyphens=False
    )
    shown, at = Text("\n".join(lines)), 0
    for word, style in head:
        shown.stylize(style, at, at + len(word))
        at += len(word)
    return Padding(shown, (0, 0, 0, indent))
