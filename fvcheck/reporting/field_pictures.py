"""Pictures of the plane: a field with its mesh, patches and control surfaces."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.flow import Flow
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import Overlay
from fvcheck.reporting.border import Along
from fvcheck.reporting.painting import (
    MOST_LINES,
    draw_boundary,
    draw_mesh,
    draw_surface,
    frame,
    height_for,
    paint,
    window_of,
    within_scale,
)
from fvcheck.reporting.style import GRID, INK, MUTED, OUT, PAPER, Drawing, plain
from fvcheck.text.numbers import short

Array = np.ndarray

_WIDTH = 9.6

ROLES = {
    "speed": ("speed", "m/s", "cividis"),
    "pressure": ("pressure", "Pa", "cividis"),
    "temperature": ("temperature", "K", "cividis"),
}


def field_values(flow: Flow, what: str) -> tuple[Array, str] | None:
    """Values at points or cells and where they live, None where the flow has none."""
    if what != "speed":
        field = flow.fields.get(what)
        return None if field is None else (field.values.astype(float), field.location)
    if (field := flow.fields.get("velocity")) is not None:
        return np.linalg.norm(field.values.astype(float), axis=1), field.location
    momentum, density = flow.fields.get("momentum"), flow.fields.get("density")
    if momentum is None or density is None or density.location != momentum.location:
        return None
    with np.errstate(divide="ignore", invalid="ignore"):
        speed = np.linalg.norm(momentum.values.astype(float), axis=1) / density.values
    return speed, momentum.location


def name_patches(panel: Any, mesh: Mesh, window: tuple[float, float, float, float]) -> None:
    """The name of each patch beside its middle edge, on the side of the fluid's outside."""
    x0, y0, x1, y1 = window
    gap = 0.012 * max(x1 - x0, y1 - y0)
    taken: list[Array] = []
    for number, name in enumerate(mesh.boundary.names[:12]):
        edges = mesh.boundary.edges[mesh.boundary.patch == number]
        if len(edges) == 0:
            continue
        ends = mesh.points[edges]
        lengths = np.hypot(*(ends[:, 1] - ends[:, 0]).T)
        middle = ends.mean(axis=1)
        body = name in mesh.bodies
        if body:
            place, out = np.average(middle, axis=0, weights=np.maximum(lengths, 1e-300)), np.zeros(2)
        else:
            # The edge nearest to the middle of the patch; of two walls, one of them.
            half = np.cumsum(lengths) >= (0.25 if _split_patch(middle, window) else 0.5) * lengths.sum()
            edge = int(np.argmax(half))
            step = ends[edge, 1] - ends[edge, 0]
            out = np.array([step[1], -step[0]]) / max(float(np.hypot(*step)), 1e-300)
            place = middle[edge] + gap * out
        if any(np.hypot(*(place - other)) < 6 * gap for other in taken):
            place = place + np.array([0.0, 4 * gap])
        taken.append(place)
        across = abs(out[0]) > abs(out[1])
        panel.annotate(
            plain(name)[:28], place, color=INK, fontsize=7.5, annotation_clip=True,
            rotation=90 if across else 0,
            ha="center" if not across else ("left" if out[0] > 0 else "right"),
            va="center" if across or body else ("bottom" if out[1] > 0 else "top"),
            bbox={"boxstyle": "round,pad=0.15", "fc": PAPER, "ec": "none", "alpha": 0.75},
        )  # fmt: skip


def _split_patch(middle: Array, window: tuple[float, float, float, float]) -> bool:
    """Whether the middle of a patch lies far from all of it, as that of two walls."""
    x0, y0, x1, y1 = window
    apart = np.hypot(*(middle - middle.mean(axis=0)).T).min()
    return bool(apart > 0.1 * max(x1 - x0, y1 - y0))


def field_drawing(flow: Flow, what: str, surfaces: Sequence[tuple[str, Overlay]]) -> Drawing | None:
    """A field over the whole domain with mesh, patches and control surfaces; None without such a field."""
    found = field_values(flow, what)
    if found is None or not np.isfinite(found[0]).any():
        return None
    values, location = found
    title, unit, colours = ROLES[what]
    x0, y0, x1, y1 = flow.mesh.bounds
    window = window_of(np.array([x0, y0]), np.array([x1, y1]), 0.045)
    known = values[np.isfinite(values)]
    names = ", ".join(plain(name) for name, _ in surfaces) or "none"
    words = (
        f"Map of the {title} between {short(float(known.min()))} and {short(float(known.max()))} {unit}, "
        f"{location} data of {flow.mesh.n_cells} cells. Control surfaces: {names}. "
        f"Patches: {', '.join(map(plain, flow.mesh.boundary.names))}."
        + ("" if within_scale(window) else " Not to scale: x and y have scales of their own.")
    )

    def draw() -> Any:
        from matplotlib.figure import Figure

        height = height_for(window, 0.8 * _WIDTH, 4.6)
        width = height * (window[2] - window[0]) / max(window[3] - window[1], 1e-300)
        width = float(np.clip(width + 2.0, 4.5, _WIDTH)) if within_scale(window) else _WIDTH
        figure = Figure(figsize=(width, height + 0.75), layout="constrained")
        panel = figure.subplots()
        painted = paint(panel, flow.mesh, values, location, window, cmap=colours)
        lines = draw_mesh(panel, flow.mesh, colors=PAPER, alpha=0.28)
        draw_boundary(panel, flow.mesh)
        for number, (name, overlay) in enumerate(surfaces):
            label_surface(panel, number, plain(name), overlay)
        frame(panel, window)
        name_patches(panel, flow.mesh, window)
        colour_bar(figure, panel, painted, f"{title} [{unit}]")
        if not lines:
            panel.set_title("mesh lines left out: too many cells", fontsize=8, color=MUTED)
        return figure

    return Drawing(f"field-{what}", f"{title.capitalize()}, mesh and control surfaces", words, draw)


def window_drawing(flow: Flow, surface: str, along: Along, name: str) -> Drawing | None:
    """Of a mesh too large to be drawn: its lines where most of the resolution band comes from."""
    border, mesh = along.border, flow.mesh
    if mesh.n_cells <= MOST_LINES or len(border.order) == 0:
        return None
    worst = int(np.argmax(along.resolution))
    centre = border.middle[worst]
    half = 14.0 * float(np.sqrt(mesh.areas[border.overlay.cell[border.order[worst]]]))
    window = (*(centre - half).tolist(), *(centre + half).tolist())
    words = (
        f"Mesh lines within {short(half, 3)} m of ({short(centre[0])}, {short(centre[1])}), where most of "
        f"the resolution band of {along.label} through “{plain(surface)}” comes from."
    )

    def draw() -> Any:
        from matplotlib.figure import Figure

        figure = Figure(figsize=(5.0, 4.4), layout="constrained")
        panel = figure.subplots()
        draw_mesh(panel, mesh, window, alpha=0.9, linewidths=0.6)
        draw_boundary(panel, mesh)
        draw_surface(panel, border.overlay, colors=INK, linewidths=2.0)
        panel.plot(*centre, "o", ms=9, mfc="none", mec=OUT, mew=1.6)
        frame(panel, window)
        return figure

    return Drawing(name, f"The mesh at “{plain(surface)}”", words, draw)


def colour_bar(figure: Any, panel: Any, painted: Any, label: str) -> None:
    """A colour bar as high as its panel."""
    bar = figure.colorbar(painted, cax=panel.inset_axes([1.012, 0.0, 0.018, 1.0]))
    bar.set_label(label)
    bar.outline.set_visible(False)
    bar.solids.set_rasterized(True)


def label_surface(panel: Any, number: int, name: str, overlay: Overlay) -> None:
    """A control surface as a heavy line on a light one, with its name at its upper left."""
    dashes = ("solid", (0, (6, 2)), (0, (2, 1.5)), (0, (8, 2, 2, 2)))
    draw_surface(panel, overlay, colors=PAPER, linewidths=4.0)
    draw_surface(panel, overlay, colors=INK, linewidths=2.0, linestyles=[dashes[number % len(dashes)]])
    points = np.concatenate([overlay.start, overlay.end])
    corner = points[np.argmin(points[:, 0] - points[:, 1])]
    panel.annotate(
        name[:28], corner, xytext=(5, -5), textcoords="offset points", ha="left", va="top", fontsize=8,
        color=INK, bbox={"boxstyle": "round,pad=0.2", "fc": PAPER, "ec": GRID, "alpha": 0.9},
        annotation_clip=False,
    )  # fmt: skip
