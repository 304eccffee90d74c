"""What ``fvcheck explain`` says: pages by topic, from the hint codes to the laws."""

from __future__ import annotations

from fvcheck.errors import SetupError, nearest
from fvcheck.hints import PAGES, Page
from fvcheck.pages.laws import LAWS
from fvcheck.pages.terms import TERMS
from fvcheck.pages.verdicts import VERDICTS

__all__ = ["LAWS", "TERMS", "VERDICTS", "find_page", "topics"]


def topics() -> dict[str, tuple[str, ...]]:
    """Group -> topics that have a page."""
    return {
        "words": tuple(TERMS),
        "verdicts": tuple(VERDICTS),
        "laws": tuple(LAWS),
        "hints": tuple(sorted(PAGES)),
    }


def find_page(topic: str) -> Page:
    """The page of a topic; SetupError naming the nearest one."""
    pages = {**PAGES, **LAWS, **VERDICTS, **TERMS}
    word = topic.strip().lower().replace("_", "-").replace(" ", "-")
    if word not in pages:
        close = nearest(word, pages) or "fvcheck explain lists all topics."
        raise SetupError(f"there is no topic {topic!r}", mend=close)
    return pages[word]
