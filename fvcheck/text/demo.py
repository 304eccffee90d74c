"""The bundled case as text: the two states, and what to try next."""

from __future__ import annotations

import shlex
from pathlib import Path

from rich.console import RenderableType
from rich.text import Text

from fvcheck.demo import CHECK, CONVERGED, EARLY, Demo
from fvcheck.text.console import heading, paragraph, render
from fvcheck.text.ledger import ledger_parts, verdict_line

_STORY = (
    "Air at 300 K and 0.12 m/s passes a heated bar in the channel of an enclosure, solved on a coarse mesh. "
    "A box is drawn in the wake behind the bar. Does the field conserve mass, momentum and heat in it?"
)


def demo_text(demo: Demo, place: Path, quiet: bool = False) -> str:
    """Both ledgers with a sentence each, then commands for the reader's own file."""
    end = (
        "As it should be: the unfinished run is found out, the finished one passes."
        if demo.as_expected
        else "This is not as it should be: the early state has to be open, the converged one closed."
    )
    if quiet:
        return render([Text(end)])
    parts: list[RenderableType] = [heading("The bundled case"), paragraph(body=_STORY, by=0), Text()]
    for title, result in (
        (f"After 20 iterations ({EARLY})", demo.early),
        (f"Converged ({CONVERGED})", demo.converged),
    ):
        parts.append(heading(title))
        for ledger in result.ledgers:
            parts += [*ledger_parts(ledger, amounts=False), Text()]
        parts += [*verdict_line(result.verdict), Text()]
    parts += [paragraph(body=end, by=0), Text(), heading("Next")]
    path, check = (shlex.quote(str(_shown(place / name))) for name in (EARLY, CHECK))
    # To be copied, so each on one line, however long the path.
    return render(parts) + "".join(
        f"  fvcheck {command}\n"
        for command in (
            f"balance {path} -c {check}",
            "inspect YOUR-FILE",
            'balance YOUR-FILE --density 1.2 -s "box(0, 0, 1, 1)"',
            "explain verdicts",
        )
    )


def _shown(path: Path) -> Path:
    """The path from here, where that is shorter."""
    try:
        return path.relative_to(Path.cwd())
    except ValueError:
        return path
