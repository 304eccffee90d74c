"""Drawing a plane mesh: values, lines, boundary, control surfaces; what grows with the mesh as an image."""

from __future__ import annotations

from typing import Any

import numpy as np

from fvcheck.mesh.boundary import chains
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import DRAWN, Overlay
from fvcheck.reporting.border import border_of
from fvcheck.reporting.style import INK, MUTED

Array = np.ndarray

# Meshes of more cells are drawn as an image of so many dots.
_CELLS, _DOTS = 60_000, 900

MOST_LINES = 25_000
"""Cells whose lines are drawn; more would be a grey area."""

# Boundaries and surfaces of more pieces become part of the image.
_EDGES = 4_000

# Plane domains longer or narrower than this are not drawn to scale.
_ASPECT = 9.0


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
    panel: Any, mesh: Mesh, values: Array, location: str, window: Any, blended: bool = False, **look: Any
) -> Any:
    """Colour the mesh by values at points or cells; returns what a colour bar needs.

    blended : the colours are transparent in part, so that cells drawn over one another would show
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
    if blended:
        return _paint_blended(panel, mesh, values, window, **look)
    look |= {"edgecolors": "face", "linewidths": 0.3}
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


def _paint_blended(panel: Any, mesh: Mesh, values: Array, window: Any, **look: Any) -> Any:
    """Cells by their numbers into an image first, so that no dot is covered twice."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.collections import PolyCollection
    from matplotlib.figure import Figure

    x0, y0, x1, y1 = window
    nx, ny = _dots(window)
    figure = Figure(figsize=(nx / 100.0, ny / 100.0), dpi=100, facecolor="none")
    canvas = FigureCanvasAgg(figure)
    whole = figure.add_axes((0.0, 0.0, 1.0, 1.0), frameon=False)
    whole.set_axis_off()
    whole.set(xlim=(x0, x1), ylim=(y0, y1))
    number = np.arange(1, mesh.n_cells + 1)
    code = np.stack([number >> 16, (number >> 8) & 255, number & 255], axis=1) / 255.0
    cells = [mesh.points[mesh.nodes[a:b]] for a, b in zip(mesh.offsets[:-1], mesh.offsets[1:])]
    whole.add_collection(PolyCollection(cells, facecolors=code, linewidths=0.0, antialiased=False))
    canvas.draw()
    dots = np.asarray(canvas.buffer_rgba())[::-1].astype(np.int64)
    cell = (dots[:, :, 0] << 16) + (dots[:, :, 1] << 8) + dots[:, :, 2] - 1
    inside = (dots[:, :, 3] > 0) & (cell >= 0) & (cell < mesh.n_cells)
    return _image(panel, np.ma.array(values[np.where(inside, cell, 0)], mask=~inside), window, **look)


def _image(panel: Any, image: Array, window: Any, **look: Any) -> Any:
    x0, y0, x1, y1 = window
    shown = panel.imshow(
        image, origin="lower", extent=(x0, x1, y0, y1), interpolation="nearest", aspect="auto", **look
    )
    shown.set_rasterized(True)
    return shown


def _dots(window: tuple[float, float, float, float]) -> tuple[int, int]:
    """Size of an image of a window."""
    x0, y0, x1, y1 = window
    if not within_scale(window):
        return _DOTS // 2, _DOTS // 2
    size = max(x1 - x0, y1 - y0)
    return max(2, int(_DOTS * (x1 - x0) / size)), max(2, int(_DOTS * (y1 - y0) / size))


def _paint_image(panel: Any, mesh: Mesh, values: Array, location: str, window: Any, **look: Any) -> Any:
    """A large mesh as an image: each dot has the value of the nearest cell centre, or point."""
    from scipy.spatial import cKDTree

    x0, y0, x1, y1 = window
    nx, ny = _dots(window)
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
    return _image(panel, image, window, **look)


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
    if len(cells) > MOST_LINES:
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
