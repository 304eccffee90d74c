"""A study over meshes as text."""

from __future__ import annotations

from rich.console import RenderableType
from rich.text import Text

from fvcheck.meshstudy import Quantity, Study
from fvcheck.text.console import (
    FOLDED,
    LEFT,
    heading,
    hint_lines,
    plain_table,
    render,
    rich_characters,
    verdict_text,
)
from fvcheck.text.numbers import MISSING, percent, short


def study_text(study: Study, quiet: bool = False) -> str:
    """The meshes, then each quantity with its order, extrapolated value and uncertainty."""
    if quiet:
        return render([Text(f"{len(study.quantities)} quantities on {len(study.results)} meshes")])
    parts: list[RenderableType] = [heading("study", f"{len(study.results)} meshes, fine to coarse"), Text()]
    meshes = plain_table(("file", FOLDED), "cells", "cell size", "ratio", ("verdict", LEFT))
    for number, (result, size) in enumerate(zip(study.results, study.sizes)):
        ratio = short(size / study.sizes[number - 1], 3) if number else ""
        meshes.add_row(
            str(result.case["file"]),
            str(result.case["cells"]),
            short(size),
            ratio,
            verdict_text(result.verdict),
        )
    parts += [meshes, Text()]
    sign = "±" if rich_characters() else "+-"
    surface = None
    for quantity in study.quantities:
        if quantity.surface != surface:
            surface = quantity.surface
            table = plain_table(
                ("\nquantity", FOLDED | {"min_width": 19}),
                "\nfinest",
                "\nnext",
                "\norder",
                "extra-\npolated",
                "GCI\n%",
                f"{sign}95 %\nmesh",
                f"{sign}data",
                ("\nkind", LEFT),
            )
            parts += [heading(surface), table, Text()]
        c = quantity.convergence
        table.add_row(
            f"{quantity.name} [{quantity.unit}]",
            short(c.values[0]),
            short(c.values[1]),
            MISSING if c.order is None else f"{c.order:.2f}",
            short(c.extrapolated),
            percent(_index(quantity)),
            short(c.band, 2),
            short(quantity.sampling_bands[0], 2),
            _KIND.get(c.kind, c.kind),
        )
    parts += hint_lines(study.hints)
    return render(parts)


def _index(quantity: Quantity) -> float | None:
    """Grid convergence index in percent: of the value, of an imbalance in percent of its scale."""
    found = quantity.convergence
    if quantity.scale:
        return 100.0 * found.band / quantity.scale
    return None if found.gci is None else 100.0 * found.gci


_KIND = {"oscillatory": "osc.", "monotone": "mono.", "diverging": "div.", "two meshes": "two"}
