"""Maps of where an imbalance sits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.diagnosis import Diagnosis
from fvcheck.diagnosis.where import Place
from fvcheck.laws import find_law
from fvcheck.overlay.pieces import Overlay
from fvcheck.reporting.field_pictures import colour_bar
from fvcheck.reporting.painting import draw_boundary, draw_surface, frame, height_for, paint, window_of
from fvcheck.reporting.style import INK, PAPER, Drawing
from fvcheck.text.numbers import exponent, percent, short, unit


def map_drawings(found: Diagnosis, surfaces: Sequence[tuple[str, Overlay]]) -> list[Drawing]:
    """Imbalance per area and its significance, for each row in which something stands out."""
    return [
        _map(found, place, number, surfaces)
        for number, place in enumerate((p for p in found.where if p.kind != "nowhere"), start=1)
    ]


def label_of(place: Place) -> str:
    """Law and component in one word."""
    return place.law if place.component is None else f"{place.law}-{place.component}"


def _map(found: Diagnosis, place: Place, number: int, surfaces: Sequence[tuple[str, Overlay]]) -> Drawing:
    label = label_of(place)
    regions = "; ".join(
        f"{k}: near ({short(r.centre[0])}, {short(r.centre[1])}), {short(r.size, 3)} across, "
        f"{short(r.amount)} of band {short(r.band, 2)}, {percent(100 * r.share)} % of all that stands out"
        for k, r in enumerate(place.regions, start=1)
    )
    words = f"Two maps of the {label} imbalance, {place.kind}; control surfaces are dashed. " + (
        regions and f"Regions: {regions}."
    )
    return Drawing(
        f"map-{number}", f"Where the {label} imbalance sits", words, lambda: _draw(found, place, surfaces)
    )


def two_sided() -> Any:
    """A colour map from in through nothing (transparent, whatever the page) to out."""
    from matplotlib.colors import LinearSegmentedColormap, to_rgba

    # Between the colours of light and of dark pages.
    into, out = to_rgba("#2784b3")[:3], to_rgba("#cb6420")[:3]
    ends = [(*into, 1.0), (*into, 0.0), (*out, 0.0), (*out, 1.0)]
    return LinearSegmentedColormap.from_list("two-sided", list(zip((0.0, 0.5, 0.5, 1.0), ends)))


def _draw(found: Diagnosis, place: Place, surfaces: Sequence[tuple[str, Overlay]]) -> Any:
    from matplotlib.colors import Normalize
    from matplotlib.figure import Figure
    from matplotlib.patches import Circle

    mesh, case = found.cells.flow.mesh, found.cells.flow.case
    x0, y0, x1, y1 = mesh.bounds
    window = window_of(np.array([x0, y0]), np.array([x1, y1]))
    stacked = (x1 - x0) > 1.6 * (y1 - y0)
    height = height_for(window, 8.0 if stacked else 3.9, 5.0)
    shape = (2, 1) if stacked else (1, 2)
    figure = Figure(figsize=(9.6, shape[0] * (height + 0.75) + 0.2), layout="constrained")
    panels = figure.subplots(*shape, squeeze=False).ravel()
    name = find_law(place.law).unit
    name = name if case.per_metre else name.removesuffix("/m")
    power = exponent(place.map.tolist())
    area = f"{name.removesuffix('/m')}/m³" if name.endswith("/m") else f"{name}/m²"
    for panel, values, title in (
        (panels[0], place.map / 10.0**power, f"imbalance per area [{unit(area, power, True)}]"),
        (panels[1], place.significance, "imbalance in resolution bands of its block"),
    ):
        most = float(np.nanmax(np.abs(values), initial=0.0)) or 1.0
        painted = paint(
            panel, mesh, values, "cell", window, cmap=two_sided(), norm=Normalize(-most, most), blended=True
        )
        draw_boundary(panel, mesh, linewidths=0.9)
        for _, overlay in surfaces:
            draw_surface(panel, overlay, colors=INK, linewidths=1.0, linestyles=[(0, (4, 2))])
        for number, region in enumerate(place.regions, start=1):
            radius = 0.5 * region.size
            panel.add_patch(Circle(region.centre, radius, fill=False, ec=PAPER, lw=2.6))
            panel.add_patch(Circle(region.centre, radius, fill=False, ec=INK, lw=1.3))
            panel.annotate(
                str(number), region.centre, xytext=(0, 0), textcoords="offset points", ha="center",
                va="center", fontsize=9, color=INK,
                bbox={"boxstyle": "circle,pad=0.2", "fc": PAPER, "ec": INK, "lw": 0.8, "alpha": 0.9},
            )  # fmt: skip
        frame(panel, window)
        panel.set_title(title)
        colour_bar(figure, panel, painted, "")
    return figure
