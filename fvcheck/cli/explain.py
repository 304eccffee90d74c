"""``fvcheck explain [TOPIC]``."""

from __future__ import annotations

import sys
from typing import Annotated

from typer import Argument

from fvcheck.cli.options import spread


def _begun(incomplete: str) -> list[str]:
    from fvcheck.pages import topics

    return [topic for group in topics().values() for topic in group if topic.startswith(incomplete)]


@spread
def command(
    topic: Annotated[
        str | None,
        Argument(
            metavar="[TOPIC]", help="A law, verdict, hint code, or a word of the list.", autocompletion=_begun
        ),
    ] = None,
) -> int:
    """Explain a law, band, verdict or hint code; without a topic, list them."""
    from fvcheck.pages import find_page, topics
    from fvcheck.text.pages import page_text, topics_text

    sys.stdout.write(topics_text(topics()) if topic is None else page_text(topic, find_page(topic)))
    return 0
