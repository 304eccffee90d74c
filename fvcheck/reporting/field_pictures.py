"""Pictures of the plane: a field with its mesh, patches and control surfaces."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.flow import Flow
from fvcheck.mesh.boundary import chains
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import DRAWN, Overlay
from fvcheck.reporting.border import Along, border_of
from fvcheck.reporting.style import GRID, INK, MUTED, OUT, PAPER, Drawing, plain
from fvcheck.text.numbers import short

Array = np.ndarray

# Meshes of more cells are drawn as an image of so many dots, and their lines left out.
_CELLS, _LINES, _DOTS = 60_000, 25_000, 900

# Parts of the boundary of more edges become part of the image.
_EDGES = 4_000

# Plane domains longer or narrower than this are not drawn to scale.
_ASPECT = 9.0

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


def window_of(low: Array, high: Array, margin: float = 0.04) -> tuple[float, float, float, float]:
    """(x0, y0, x1, y1) with a margin around."""
    gap = margin * float(np.max(high - low)) or 1.0
    return float(low[0] - gap), float(low[1] - gap), float(high[0] + gap), float(high[1] + gap)


def frame(panel: Any, window: tuple[float, float, float, float], unit: str = "m") -> None:
    """Limits, equal scales where the window is not too long, coordinates as labels."""
    x0, y0, x1, y1 = window
    panel.set_xlim(x0, x1)
    panel.set_ylim(y0, y1)
    panel.set_aspect("equal" if within_scale(window) else "auto")
    panel.set_xlabel(f"x [{unit}]")
    panel.set_ylabel(f"y [{unit}]")
    for side in panel.spines.values():
        side.set_visible(False)
    panel.locator_params(axis="x", nbins=6)
    panel.locator_params(axis="y", nbins=5)


def within_scale(window: tuple[float, float, float, float]) -> bool:
    """Whether a window can be drawn to scale."""
    x0, y0, x1, y1 = window
    ratio = (x1 - x0) / max(y1 - y0, 1e-300)
    return 1.0 / _ASPECT <= ratio <= _ASPECT


def height_for(window: tuple[float, float, float, float], width: float, most: float = 7.0) -> float:
    """Height [in] of a panel that is ``width`` wide."""
    x0, y0, x1, y1 = window
    return float(np.clip(width * (y1 - y0) / max(x1 - x0, 1e-300), 1.4, most))


def paint(
    panel: Any, mesh: Mesh, values: Array, location: str, window: Any, seams: bool = True, **look: Any
) -> Any:
    """Colour the mesh by values at points or cells; returns what a colour bar needs.

    seams : whether cells are drawn a little too large, to hide seams; not with transparent colours
    """
    if mesh.n_cells > _CELLS:
        return _paint_image(panel, mesh, values, location, window, **look)
    if location == "point":
        from matplotlib.tri import Triangulation

        triangles = fans(mesh)
        bad = ~np.isfinite(values)[triangles].all(axis=1)
        x, y = mesh.points.T
        grid = Triangulation(x, y, triangles, mask=bad if bad.any() else None)
        shown = np.where(np.isfinite(values), values, np.nanmin(values[np.isfinite(values)], initial=0.0))
        return panel.tripcolor(grid, shown, shading="gouraud", rasterized=True, **look)
    look |= {"edgecolors": "face", "linewidths": 0.3} if seams else {"linewidths": 0.0, "antialiased": False}
    return _polygons(panel, mesh, np.arange(mesh.n_cells), values, **look)


def fans(mesh: Mesh) -> Array:
    """(t, 3) triangles of all cells for painting: fans, fair for convex cells."""
    counts = np.diff(mesh.offsets)
    cell = np.repeat(np.arange(mesh.n_cells), np.maximum(counts - 2, 0))
    first = np.cumsum(np.maximum(counts - 2, 0)) - np.maximum(counts - 2, 0)
    k = np.arange(len(cell)) - first[cell]
    base = mesh.offsets[cell]
    return np.column_stack([mesh.nodes[base], mesh.nodes[base + k + 1], mesh.nodes[base + k + 2]])


def _polygons(panel: Any, mesh: Mesh, cells: Array, values: Array, **look: Any) -> Any:
    from matplotlib.collections import PolyCollection

    outlines = [mesh.points[mesh.nodes[mesh.offsets[c] : mesh.offsets[c + 1]]] for c in cells.tolist()]
    painted = PolyCollection(outlines, array=np.ma.masked_invalid(values[cells]), rasterized=True, **look)
    panel.add_collection(painted)
    return painted


def _paint_image(panel: Any, mesh: Mesh, values: Array, location: str, window: Any, **look: Any) -> Any:
    """A large mesh as an image: each dot has the value of the nearest cell centre, or point."""
    from scipy.spatial import cKDTree

    x0, y0, x1, y1 = window
    size = max(x1 - x0, y1 - y0)
    nx, ny = (max(2, int(_DOTS * side / size)) for side in (x1 - x0, y1 - y0))
    if not within_scale(window):
        nx = ny = _DOTS // 2
    x = x0 + (np.arange(nx) + 0.5) * (x1 - x0) / nx
    y = y0 + (np.arange(ny) + 0.5) * (y1 - y0) / ny
    places = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
    if location == "point":
        seeds = mesh.points
    else:
        total = np.add.reduceat(mesh.points[mesh.nodes], mesh.offsets[:-1], axis=0)
        seeds = total / np.diff(mesh.offsets)[:, None]
    nearest = cKDTree(seeds).query(places)[1]
    image = values[nearest].reshape(ny, nx)
    image = np.ma.array(image, mask=~_inside(mesh, x, y) | ~np.isfinite(image))
    shown = panel.imshow(
        image, origin="lower", extent=(x0, x1, y0, y1), interpolation="nearest", aspect="auto", **look
    )
    shown.set_rasterized(True)
    return shown


def _inside(mesh: Mesh, x: Array, y: Array) -> Array:
    """(ny, nx) whether the dots lie in the domain: boundary edges to the left of each, by parity."""
    ends = mesh.points[mesh.boundary.edges]
    (ax, ay), (bx, by) = ends[:, 0].T, ends[:, 1].T
    flips = np.zeros((len(y), len(x) + 1), np.int64)
    low = np.searchsorted(y, np.minimum(ay, by), "left")
    high = np.searchsorted(y, np.maximum(ay, by), "left")
    edge = np.repeat(np.arange(len(ax)), high - low)
    row = np.arange(len(edge)) - np.repeat(np.cumsum(high - low) - (high - low), high - low) + low[edge]
    at = ax[edge] + (y[row] - ay[edge]) / (by - ay)[edge] * (bx - ax)[edge]
    np.add.at(flips, (row, np.searchsorted(x, at, "left")), 1)
    return np.cumsum(flips, axis=1)[:, :-1] % 2 == 1


def draw_mesh(panel: Any, mesh: Mesh, window: Any = None, **look: Any) -> bool:
    """The mesh's lines inside a window, as an image; False where they are too many."""
    from matplotlib.collections import LineCollection

    cells = np.arange(mesh.n_cells)
    if window is not None:
        cells = cells_in(mesh, window)
    if len(cells) > _LINES:
        return False
    counts = np.diff(mesh.offsets)[cells]
    base = np.repeat(mesh.offsets[cells], counts)
    step = np.arange(counts.sum()) - np.repeat(np.cumsum(counts) - counts, counts)
    following = np.where(step + 1 == np.repeat(counts, counts), 0, step + 1)
    a, b = mesh.nodes[base + step], mesh.nodes[base + following]
    ends = np.unique(np.sort(np.column_stack([a, b]), axis=1), axis=0)
    style: dict[str, Any] = {"colors": MUTED, "linewidths": 0.35, "alpha": 0.45, "rasterized": True} | look
    panel.add_collection(LineCollection(list(mesh.points[ends]), **style), autolim=False)
    return True


def cells_in(mesh: Mesh, window: tuple[float, float, float, float]) -> Array:
    """Cells whose first corner lies in a window."""
    x0, y0, x1, y1 = window
    first = mesh.points[mesh.nodes[mesh.offsets[:-1]]]
    return np.flatnonzero(((first >= (x0, y0)) & (first <= (x1, y1))).all(axis=1))


def draw_boundary(panel: Any, mesh: Mesh, **look: Any) -> None:
    """The boundary of the domain as a line."""
    from matplotlib.collections import LineCollection

    style: dict[str, Any] = {"colors": INK, "linewidths": 1.1} | look
    edges = mesh.boundary.edges
    if len(edges) > _EDGES:
        lines: list[Array] = list(mesh.points[edges])
        style["rasterized"] = True
    else:
        lines = [
            mesh.points[np.append(chain, chain[0]) if closed else chain] for chain, closed in _chains(mesh)
        ]
    panel.add_collection(LineCollection(lines, **style), autolim=False)


def _chains(mesh: Mesh) -> list[tuple[Array, bool]]:
    """Chains of boundary points, and whether each comes back to its start."""
    out = []
    known = {tuple(edge) for edge in mesh.boundary.edges.tolist()}
    for chain in chains(mesh.boundary.edges, mesh.points):
        out.append((chain, (int(chain[-1]), int(chain[0])) in known))
    return out


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


def draw_surface(panel: Any, overlay: Overlay, **look: Any) -> None:
    """The drawn pieces of a control surface; enclosed boundary where nothing is drawn."""
    from matplotlib.collections import LineCollection

    lines = outlines(overlay)
    if sum(map(len, lines)) > _EDGES:
        look = {"rasterized": True} | look
    panel.add_collection(LineCollection(lines, capstyle="round", **look), autolim=False)


def outlines(overlay: Overlay) -> list[Array]:
    """Drawn pieces joined to lines, corners only."""
    border = border_of(overlay)
    keep = border.patch == DRAWN
    if not keep.any():
        keep = np.ones(len(keep), bool)
    start, end = overlay.start[border.order], overlay.end[border.order]
    goes_on = keep[1:] & keep[:-1] & (border.chain[1:] == border.chain[:-1])
    first = np.flatnonzero(keep & ~np.concatenate([[False], goes_on]))
    last = np.flatnonzero(keep & ~np.concatenate([goes_on, [False]]))
    return [_corners(np.vstack([start[a : b + 1], end[b : b + 1]])) for a, b in zip(first, last)]


def _corners(line: Array) -> Array:
    """A line without points between which it does not turn."""
    step = np.diff(line, axis=0)
    turn = np.abs(step[1:, 0] * step[:-1, 1] - step[1:, 1] * step[:-1, 0])
    size = np.hypot(*step.T)
    corner = turn > 1e-6 * size[1:] * size[:-1]
    return line[np.concatenate([[True], corner, [True]])]


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
    if mesh.n_cells <= _LINES or len(border.order) == 0:
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
