"""Tables as HTML, for the display of results in a notebook."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from html import escape


def number(value: float | None, digits: int = 5) -> str:
    """A few significant digits; nothing for None."""
    if value is None:
        return ""
    return format(value, f".{digits}g") if math.isfinite(value) else str(value)


def html_table(titles: Sequence[str], rows: Iterable[Sequence[object]], caption: str = "") -> str:
    """Rows of texts (to the left) and numbers (to the right, None as nothing); all of it escaped."""
    out = [f"<caption>{escape(caption)}</caption>" if caption else ""]
    out.append("<thead><tr>" + "".join(f"<th>{escape(title)}</th>" for title in titles) + "</tr></thead>")
    out.append("<tbody>")
    for row in rows:
        out.append("<tr>" + "".join(_cell(value) for value in row) + "</tr>")
    return "<table>" + "".join(out) + "</tbody></table>"


def html_hints(hints: Iterable[object]) -> str:
    """``CODE: message`` of hints as a list; nothing where there are none."""
    items = "".join(
        f"<li>{escape(str(getattr(hint, 'code', '')))}: {escape(str(getattr(hint, 'message', hint)))}</li>"
        for hint in hints
    )
    return f"<ul>{items}</ul>" if items else ""


def html_line(bold: object, *facts: object) -> str:
    """A name in bold, and what there is to say about it."""
    return f"<p><b>{escape(str(bold))}</b> {escape(', '.join(map(str, facts)))}</p>"


def _cell(value: object) -> str:
    if value is None or (isinstance(value, int | float) and not isinstance(value, bool)):
        text = str(value) if isinstance(value, int) else number(value)
        return f'<td style="text-align: right">{text}</td>'
    return f'<td style="text-align: left">{escape(str(value))}</td>'
