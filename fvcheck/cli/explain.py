"""``fvcheck explain [TOPIC]``."""

from __future__ import annotations

import sys
from typing import Annotated

from typer import Argument

from fvcheck.cli.options import spread


@spread
def command(
    topic: Annotated[
        str | None, Argument(metavar="[TOPIC]", help="A law, verdict, hint code, or a word of the list.")
    ] = None,
) -> int:
    """Explain a law, band, verdict or hint code; without a topic, list them."""
    from fvcheck.pages import find_page, topics
    from fvcheck.text.pages import page_text, topics_text

    sys.stdout.write(topics_text(topics()) if topic is None else page_text(topic, find_page(topic)))
    return 0
