"""What crosses a control surface, drawn along it, and where on it the bands come from."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.flow import Flow
from fvcheck.overlay.pieces import DRAWN
from fvcheck.reporting.beside import STRETCHES, Beside, told_beside
from fvcheck.reporting.border import Along, Border
from fvcheck.reporting.painting import (
    cells_in,
    draw_boundary,
    draw_mesh,
    draw_surface,
    height_for,
    window_of,
    within_scale,
)
from fvcheck.reporting.style import GRID, IN, INK, MUTED, OUT, PAPER, SERIES, Drawing, minus, plain
from fvcheck.text.numbers import exponent, percent, short, unit

Array = np.ndarray

# Arrows around a border, bars of the bands, and steps of the flux along it.
_ARROWS, _BARS, _STEPS = 56, 48, 240

# So much of the border is marked by letters, in the map and along the axis.
_LETTERS = "ABCDEFGH"

# Arrows are so far apart [in] at least.
_APART = 0.13

_MESH_CELLS = 6_000


def per_metre(name: str) -> str:
    """Unit of a flux density along the border."""
    return f"{name.removesuffix('/m')}/m²" if name.endswith("/m") else f"{name}/m"


def binned(border: Border, values: Array, count: int) -> tuple[Array, Array, Array]:
    """Sums of ``values`` (n,) in bins, and where each begins and ends [m]."""
    number = border.bins(count)
    sums = np.bincount(number, values)
    first = np.searchsorted(number, np.arange(len(sums)), "left")
    last = np.searchsorted(number, np.arange(len(sums)), "right")
    return sums, border.at[first], border.at[last]


def flux_drawing(
    flow: Flow,
    surface: str,
    along: Along,
    name: str,
    parts: Sequence[Beside] = (),
    scale: float | None = None,
) -> Drawing:
    """Arrows in and out around the surface; flux and bands along it.

    parts : imbalances of the volume beside each stretch; scale : of the row, for percent
    """
    shown = tuple(parts) if scale else ()
    border = along.border
    sums, begin, end = binned(border, along.flux, _BARS)
    net, most = float(along.flux.sum()), float(np.abs(along.flux).sum())
    peak_out, peak_in = (int(np.argmax(sign * sums)) for sign in (1.0, -1.0))
    places = _middles(border, begin, end)

    def place(k: int) -> str:
        return f"({short(places[k, 0], 3)}, {short(places[k, 1], 3)})"

    said = []
    if sums[peak_out] > 0:
        said.append(f"most goes out near {place(peak_out)}")
    if sums[peak_in] < 0:
        said.append(f"most comes in near {place(peak_in)}")
    said.append(f"net {short(net)} {along.unit} of {short(most)} that crosses in all")
    said.append(_told_bands(border, along))
    said += [told] if (told := told_beside(shown, scale, _LETTERS)) else []
    words = "; ".join(said)
    words = f"{words[:1].upper()}{words[1:]}."

    def draw() -> Any:
        return _draw(flow, along, shown, scale or 1.0)

    return Drawing(name, f"{along.label} through “{plain(surface)}”", words, draw)


def _told_bands(border: Border, along: Along) -> str:
    """Where the larger part of the sampling band comes from, in words."""
    sums, begin, end = binned(border, along.sampling, _BARS)
    whole = float(along.sampling.sum()) + along.inside[0]
    if not whole > 0:
        return "no sampling band"
    peak = int(np.argmax(sums))
    x, y = _middles(border, begin, end)[peak]
    inside = along.inside[0] / whole
    text = f"of the sampling band {percent(100 * sums[peak] / whole)} % comes from near "
    text += f"({short(x, 3)}, {short(y, 3)})"
    return text + (f", {percent(100 * inside)} % from terms inside the volume" if inside > 0.01 else "")


def _middles(border: Border, begin: Array, end: Array) -> Array:
    """(k, 2) middle of the piece in the middle of each bin."""
    return border.middle[_pieces_at(border, 0.5 * (begin + end))]


def _pieces_at(border: Border, at: Array) -> Array:
    return np.clip(np.searchsorted(border.at, at, "right") - 1, 0, len(border.order) - 1)


def _draw(flow: Flow, along: Along, parts: Sequence[Beside], scale: float) -> Any:
    from matplotlib.figure import Figure

    border = along.border
    points = np.concatenate([border.overlay.start, border.overlay.end])
    low, high = points.min(axis=0), points.max(axis=0)
    window = window_of(low, high, 0.2)
    if wide(window):
        map_height = height_for(window, 9.0, 4.0)
        heights = [2.0, 1.3, 1.3][: 3 if parts else 2]
        figure = Figure(figsize=(9.6, map_height + 0.7 + sum(heights)), layout="constrained")
        left, *panels = figure.subplots(1 + len(heights), 1, height_ratios=[map_height + 0.5, *heights])
    else:
        heights = [1.7, 1.0, 1.0][: 3 if parts else 2]
        figure = Figure(figsize=(9.6, 1.6 + sum(heights)), layout="constrained")
        grid = figure.add_gridspec(len(heights), 2, width_ratios=[1.0, 1.3], height_ratios=heights)
        left = figure.add_subplot(grid[:, 0])
        panels = [figure.add_subplot(grid[k, 1]) for k in range(len(heights))]
    upper, lower = panels[:2]
    for panel in panels[1:]:
        panel.sharex(upper)
    power = exponent(along.density.tolist())
    _map(left, flow, along, window, power)
    _flux(upper, flow, along, power)
    _bands(lower, along)
    if parts:
        _imbalance(panels[2], parts, scale)
    marks = _marks(border)
    for panel in panels:
        panel.set_xlim(0.0, border.length)
        panel.set_xticks(marks, list(_LETTERS[: len(marks)]))
    for panel in panels[:-1]:
        panel.tick_params(labelbottom=False)
    panels[-1].set_xlabel(f"along the border, {short(border.length)} m, fluid of the volume on the left")
    return figure


def wide(window: tuple[float, float, float, float]) -> bool:
    """Whether the map stands above the curves instead of beside them."""
    return (window[2] - window[0]) > 2.2 * (window[3] - window[1])


def _marks(border: Border) -> Array:
    return border.length * np.arange(STRETCHES) / STRETCHES


def _map(panel: Any, flow: Flow, along: Along, window: Any, power: int) -> None:
    border = along.border
    if len(cells_in(flow.mesh, window)) <= _MESH_CELLS:
        draw_mesh(panel, flow.mesh, window, colors=MUTED, alpha=0.3)
    draw_boundary(panel, flow.mesh, linewidths=0.9, colors=MUTED)
    draw_surface(panel, border.overlay, colors=INK, linewidths=1.6)
    scale = (
        min(4.0 / (window[2] - window[0]), 3.4 / (window[3] - window[1]))
        if not wide(window)
        else 9.0 / (window[2] - window[0])
    )
    count = int(np.clip(border.length * scale / _APART, 8, _ARROWS))
    sums, begin, end = binned(border, along.flux, count)
    piece = _pieces_at(border, 0.5 * (begin + end))
    density = sums / np.maximum(end - begin, 1e-300)
    extent = max(window[2] - window[0], window[3] - window[1])
    most = float(np.abs(density).max(initial=0.0))
    if most > 0:
        arrows = border.normal[piece] * (0.15 * extent * density / most)[:, None]
        for sign, colour in ((1.0, OUT), (-1.0, IN)):
            keep = sign * density > 0.004 * most
            panel.quiver(
                *border.middle[piece[keep]].T, *arrows[keep].T, angles="xy", scale_units="xy", scale=1.0,
                units="inches", width=0.017, headwidth=4.2, headlength=4.6, headaxislength=4.2,
                minlength=0.4, color=colour, zorder=4,
            )  # fmt: skip
    marks = _pieces_at(border, _marks(border) + 1e-9 * border.length)
    starts = border.overlay.start[border.order[marks]]
    panel.plot(*starts.T, "o", ms=3.4, mfc=PAPER, mec=INK, mew=1.0, zorder=5)
    nearest = border.bins(count)[marks]
    for letter, point, normal, flux in zip(_LETTERS, starts, border.normal[marks], density[nearest]):
        away = -normal if flux >= 0 else normal
        panel.annotate(
            letter, point, xytext=tuple(9.0 * away), textcoords="offset points", ha="center", va="center",
            fontsize=8, color=INK, zorder=6,
            bbox={"boxstyle": "circle,pad=0.1", "fc": PAPER, "ec": "none", "alpha": 0.85},
        )  # fmt: skip
    panel.set_xlim(window[0], window[2])
    panel.set_ylim(window[1], window[3])
    panel.set_aspect("equal" if within_scale(window) else "auto")
    panel.set_xticks([])
    panel.set_yticks([])
    for side in panel.spines.values():
        side.set_visible(False)
    longest = unit(per_metre(along.unit), power, True)
    panel.set_title(f"outward arrows: out, inward: in\nlongest {short(most / 10.0**power, 3)} {longest}")


def _flux(panel: Any, flow: Flow, along: Along, power: int) -> None:
    border = along.border
    if len(border.order) > 1.5 * _STEPS:
        sums, begin, end = binned(border, along.flux, _STEPS)
    else:
        sums, begin, end = along.flux, border.at[:-1], border.at[1:]
    density = sums / np.maximum(end - begin, 1e-300) / 10.0**power
    density[end - begin < 1e-9 * border.length] = 0.0
    edges = np.append(begin, end[-1])
    panel.stairs(np.maximum(density, 0.0), edges, fill=True, color=OUT, alpha=0.45, lw=0)
    panel.stairs(np.minimum(density, 0.0), edges, fill=True, color=IN, alpha=0.45, lw=0)
    panel.stairs(density, edges, baseline=None, color=INK, lw=1.1)
    panel.axhline(0.0, color=INK, lw=0.8)
    low, high = min(density.min(initial=0.0), 0.0), max(density.max(initial=0.0), 0.0)
    gap = 0.12 * ((high - low) or 1.0)
    panel.set_ylim(low - gap, high + gap)
    for at, colour, word in ((0.92, OUT, "↑ out"), (1.0, IN, "↓ in")):
        panel.text(at, 1.02, word, color=colour, transform=panel.transAxes, ha="right", va="bottom")
    panel.set_ylabel(f"flux\n[{unit(per_metre(along.unit), power, True)}]")
    panel.set_title(minus(f"net {short(float(along.flux.sum()))} {along.unit}"))
    _name_runs(panel, flow, border)


def _name_runs(panel: Any, flow: Flow, border: Border) -> None:
    """Shade what is domain boundary, and name it where there is room."""
    names = flow.mesh.boundary.names
    runs = border.runs()
    named = all(patch != DRAWN for _, _, patch in runs)
    for a, b, patch in runs:
        if patch == DRAWN:
            continue
        if not named:
            panel.axvspan(a, b, color=GRID, alpha=0.55, lw=0, zorder=0)
        if b - a > 0.06 * border.length:
            room = int(90 * (b - a) / border.length) + 1
            panel.text(
                0.5 * (a + b), 1.0, plain(names[patch])[:room], ha="center", va="top", fontsize=7.5,
                color=MUTED, transform=panel.get_xaxis_transform(),
            )  # fmt: skip
    for a, _, _ in runs[1:]:
        panel.axvline(a, color=GRID, lw=0.8, zorder=0)


def _bands(panel: Any, along: Along) -> None:
    """Share of both bands by place: one as bars, one as a line."""
    border = along.border
    shares = []
    for values, inside in ((along.sampling, along.inside[0]), (along.resolution, along.inside[1])):
        sums, begin, end = binned(border, values, _BARS)
        whole = float(values.sum()) + inside
        shares.append(100.0 * sums / whole if whole > 0 else np.zeros_like(sums))
    edges = np.append(begin, end[-1])
    panel.stairs(shares[0], edges, fill=True, color=SERIES[0], alpha=0.55, lw=0, label="sampling band")
    panel.stairs(shares[1], edges, baseline=None, color=SERIES[1], lw=1.4, label="resolution band")
    most = max(float(share.max(initial=0.0)) for share in shares)
    panel.set_ylim(0.0, 1.35 * most or 1.0)
    panel.set_ylabel("% of band\nper bar")
    panel.legend(loc="upper right", ncols=2, borderaxespad=0.0, handlelength=1.4)
    low = 100.0 * float(np.diff(border.at)[along.degree < 3].sum()) / max(border.length, 1e-300)
    if low > 0:
        first = border.at[:-1][along.degree < 3]
        last = border.at[1:][along.degree < 3]
        panel.hlines(np.full(len(first), 1.12 * most), first, last, color=MUTED, lw=3)
        panel.set_title(f"grey bar: the data jump, degree 1 ({percent(low)} %)", fontsize=8, color=MUTED)


def _imbalance(panel: Any, parts: Sequence[Beside], scale: float) -> None:
    """Imbalance of the volume beside each stretch, over what the mesh explains of it."""
    lines = []
    for part in parts:
        value, half = 100.0 * part.imbalance / scale, 100.0 * part.resolution / scale
        panel.fill_between([part.begin, part.end], -half, half, color=GRID, alpha=0.8, lw=0)
        panel.plot([part.begin, part.end], [value, value], color=INK, lw=2.4, solid_capstyle="butt")
        if part.stands_out:
            middle = 0.5 * (part.begin + part.end)
            panel.vlines(middle, 0.0, value, color=INK, lw=1.0)
            lines.append((middle, value))
    for middle, value in lines:
        panel.plot(middle, value, "o", ms=5, mfc=PAPER, mec=INK, mew=1.4, zorder=4)
    panel.axhline(0.0, color=MUTED, lw=0.8)
    panel.margins(y=0.15)
    panel.set_ylabel("imbalance\n[% of scale]")
    panel.set_title(
        "of the volume beside it; grey: resolution band; ring: beyond it", fontsize=8, color=MUTED
    )
