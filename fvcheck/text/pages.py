"""Pages of ``fvcheck explain`` as text."""

from __future__ import annotations

from collections.abc import Mapping

from rich.console import RenderableType

from fvcheck.hints import Page
from fvcheck.text.console import heading, paragraph, render


def page_text(topic: str, page: Page) -> str:
    """What is seen, why it matters, what to do."""
    parts: list[RenderableType] = [heading(topic)]
    for head, body in (("", page.seen), ("why", page.why), ("do", page.do)):
        for number, text in enumerate(body.split("\n")):
            lead = f"{head if number == 0 else '':5s}"
            parts.append(paragraph((lead, "dim"), body=text, by=5))
    return render(parts)


def topics_text(topics: Mapping[str, tuple[str, ...]]) -> str:
    """The topics, by group."""
    parts: list[RenderableType] = [heading("fvcheck explain TOPIC")]
    parts += [
        paragraph((f"{group:9s} ", "dim"), body="  ".join(names), by=10) for group, names in topics.items()
    ]
    return render(parts)
