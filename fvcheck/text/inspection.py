"""What is in an export, as text."""

from __future__ import annotations

import math
from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from fvcheck.inspection import ArrayFacts, Inspection, PatchFacts
from fvcheck.text.console import (
    FOLDED,
    LEFT,
    heading,
    hint_lines,
    paragraph,
    plain_table,
    render,
    rich_characters,
)
from fvcheck.text.numbers import short

_SIDES = {0: "+x", 90: "+y", 180: "-x", 270: "-y", 360: "+x"}


def inspection_text(found: Inspection, quiet: bool = False) -> str:
    """Mesh, arrays, patches, steps, then what was noticed."""
    summary = Text(_summary(found))
    if quiet:
        return render([summary])
    parts: list[RenderableType] = [heading(found.file, found.format)]
    parts += [paragraph((f"{head:8s}", "dim"), body=body, indent=2, by=8) for head, body in _facts(found)]
    parts += [Text(), _arrays(found.arrays), Text(), _patches(found.patches), Text()]
    parts += hint_lines(found.hints)
    return render([*parts, summary])


def _facts(found: Inspection) -> Iterator[tuple[str, str]]:
    kinds = ", ".join(
        f"{count} {kind}{'' if count == 1 else _plural(kind)}" for kind, count in found.cell_kinds.items()
    )
    yield "mesh", f"{found.cells} cells from {kinds}; {found.points} points"
    x0, y0, x1, y1 = found.bounds
    yield "extent", f"x {_range(x0, x1)}, y {_range(y0, y1)}; area {short(found.area, 5)}"
    yield "edges", f"{short(found.edge_lengths[0])} to {short(found.edge_lengths[1])} long"
    thick = f", one cell thick in the file: {short(found.thickness)}" if found.thickness else ""
    yield "plane", f"{found.plane}{thick}"
    if found.times:
        times = (
            f"time {_range(found.times[0], found.times[-1])}"
            if found.steps > 1
            else f"time {found.times[0]:g}"
        )
        yield (
            "steps",
            f"{found.steps} stored, {times}; shown: step {found.step}, time {found.times[found.step]:g}",
        )
    yield "bodies", ", ".join(found.bodies) or "none"


def _plural(kind: str) -> str:
    return {"hexahedron": "", "polyhedron": ""}.get(kind, "s")


def _range(low: float, high: float) -> str:
    return f"{short(low, 6)} to {short(high, 6)}"


def _arrays(arrays: tuple[ArrayFacts, ...]) -> Table:
    table = plain_table(
        ("array", FOLDED),
        ("at", LEFT),
        "parts",
        ("type", LEFT),
        "from",
        "to",
        ("role", FOLDED),
    )
    for facts in arrays:
        row = facts.row
        role = Text(row.role, style="" if row.role == "-" else "cyan")
        if facts.not_finite:
            role.append(f"  {facts.not_finite} NaN", style="bold red")
        table.add_row(
            row.name,
            row.location,
            str(row.components),
            row.dtype,
            short(row.low, 5),
            short(row.high, 5),
            role,
        )
    return table


def _patches(patches: tuple[PatchFacts, ...]) -> Table:
    table = plain_table(
        ("\npatch", FOLDED | {"min_width": 8}),
        "\nedges",
        "\nlength",
        ("\nfaces", LEFT),
        ("\nplace", LEFT),
        "velocity\nthrough",
        ("\n", FOLDED),
    )
    for patch in patches:
        notes = [word for word, here in (("body", patch.body), ("no-slip", patch.wall)) if here]
        if patch.kind:
            notes.append(patch.kind)
        through = patch.through
        # A rounding error through a wall is nothing to look at.
        if (
            through is not None
            and patch.stillness is not None
            and abs(through) < 1e-3
            and patch.stillness < 0.1
        ):
            through = 0.0
        table.add_row(
            patch.name,
            str(patch.edges),
            short(patch.length, 4),
            _facing(patch),
            _place(patch),
            short(through),
            ", ".join(notes),
        )
    return table


def _facing(patch: PatchFacts) -> str:
    """Direction of the outward normal, where the patch is about straight."""
    x, y = patch.normal
    if math.hypot(x, y) < 0.5:
        return "-"
    angle = round(math.degrees(math.atan2(y, x))) % 360
    return _SIDES.get(angle, f"{angle} deg")


def _place(patch: PatchFacts) -> str:
    """Extent of a patch; of a body its middle."""
    x0, y0, x1, y1 = patch.bounds
    if patch.body:
        return f"about ({short(0.5 * (x0 + x1))}, {short(0.5 * (y0 + y1))})"
    dots = "…" if rich_characters() else ".."
    parts = []
    for axis, low, high in (("x", x0, x1), ("y", y0, y1)):
        flat = high - low <= 1e-6 * patch.length
        parts.append(f"{axis} {short(low)}" if flat else f"{axis} {short(low)}{dots}{short(high)}")
    return ", ".join(parts)


def _summary(found: Inspection) -> str:
    roles = [
        facts.row.role for facts in found.arrays if facts.row.role not in ("-",) and "?" not in facts.row.role
    ]
    return f"fields found: {', '.join(dict.fromkeys(roles)) or 'none'}"
