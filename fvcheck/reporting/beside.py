"""Where beside a control surface its imbalance sits.

An imbalance is a sum over a whole border: no place on it has a share of its own. But the volume can
be divided into the parts nearest to each stretch of the border. Each part is a control volume with a
ledger and bands, what crosses from part to part cancels, and the imbalances add up to that of the whole.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fvcheck.entries import rows_of
from fvcheck.errors import SurfaceError
from fvcheck.laws import Law
from fvcheck.ledger import Ledger
from fvcheck.many import sampled_volumes
from fvcheck.reporting.border import Border
from fvcheck.sources import Source, outline
from fvcheck.surfaces import ControlSurface
from fvcheck.surfaces.rings import polygon_rings
from fvcheck.volume import SampledVolume

Array = np.ndarray

STRETCHES = 8
"""Into so many the border is divided, in walking order."""

# Points on each stretch that tell what is nearest to it.
_POINTS = 48

# They are moved at random by this share of their extent: the library that divides the plane between
# them makes overlapping cells where many are at one distance from a place, as on a square.
_MOVED = 1e-7

# Parts of a smaller share of the plane are rounding of the division.
_SLIVER = 1e-12

# Parts that leave more of the area out, or hold it twice, are no division.
_GAP = 1e-9


@dataclass(frozen=True)
class Beside:
    """The part of a volume that is nearest to one stretch of its border, under one row of the ledger.

    number, begin, end : of the stretch, and where it lies along the border [m] in walking order
    imbalance, sampling, resolution : of the part and its bands, in the law's unit; over all parts the
        imbalances add up to the row's, to its sampling band (to rounding where no data jump)
    """

    number: int
    begin: float
    end: float
    imbalance: float
    sampling: float
    resolution: float

    @property
    def stands_out(self) -> bool:
        """Whether it is more than the mesh explains."""
        return abs(self.imbalance) > self.resolution


def beside_border(
    volume: SampledVolume, border: Border, ledger: Ledger, laws: Sequence[Law], sources: Sequence[Source]
) -> dict[str, tuple[Beside, ...]]:
    """Row label -> its parts; empty for what bounds no volume, or stores something."""
    if not ledger.closed or any(row.storage for row in ledger.rows) or len(border.order) < STRETCHES:
        return {}
    from shapely.errors import GEOSException

    flow = volume.flow
    told = {row.law for row in ledger.rows}
    chosen = [law for law in laws if law.name in told]
    scales = {row.law: row.scale for row in ledger.rows if row.scale}
    try:
        shapes = enumerate(_shapes(volume, border))
        found_parts = [(number, _surface(shape, volume.surface)) for number, shape in shapes]
        kept = [(number, part) for number, part in found_parts if part is not None]
        sampled = list(sampled_volumes(flow, [part for _, part in kept], chosen, volume.about))
    except (SurfaceError, GEOSException):  # no fluid in a part, or outlines that cannot be divided
        return {}
    whole = volume.overlay.area
    if abs(sum(held.overlay.area for held in sampled) - whole) > _GAP * abs(whole):
        return {}
    out: dict[str, list[Beside]] = {}
    for (number, _), held in zip(kept, sampled):
        held.datum = volume.datum  # one level for all, or what crosses between parts would not cancel
        begin, end = (border.length * k / STRETCHES for k in (number, number + 1))
        for law in chosen:
            for row in rows_of(law, held, {}, scales, sources):
                assert row.imbalance is not None
                found = Beside(number, begin, end, row.imbalance, row.sampling_band, row.resolution_band)
                out.setdefault(row.label, []).append(found)
    return {label: tuple(found) for label, found in out.items()}


def _shapes(volume: SampledVolume, border: Border) -> list[Any]:
    """Per stretch what is nearest to it within the drawn outlines; of the domain, in the whole plane."""
    import shapely

    x0, y0, x1, y1 = volume.flow.mesh.bounds
    room = 0.1 * max(x1 - x0, y1 - y0)
    frame = shapely.box(x0 - room, y0 - room, x1 + room, y1 + room)
    within = frame if volume.surface.kind == "domain" else outline(volume.surface)
    points, stretch = _spread(border)
    sites = np.asarray(shapely.points(points))
    reach = shapely.union(frame, within.envelope)
    cells = shapely.get_parts(shapely.voronoi_polygons(shapely.MultiPoint(points), extend_to=reach))
    site, cell = shapely.STRtree(cells).query(sites, predicate="within")
    shapes = []
    for number in range(STRETCHES):
        mine = np.unique(cell[stretch[site] == number])
        shapes.append(shapely.intersection(shapely.union_all(cells[mine]), within))
    return shapes


def _spread(border: Border) -> tuple[Array, Array]:
    """(n, 2) points evenly along the border, and the number of the stretch of each."""
    count = STRETCHES * _POINTS
    at = border.length * (np.arange(count) + 0.5) / count
    piece = np.clip(np.searchsorted(border.at, at, "right") - 1, 0, len(border.order) - 1)
    lengths = np.maximum(np.diff(border.at)[piece], 1e-300)
    share = ((at - border.at[piece]) / lengths)[:, None]
    start, end = (ends[border.order[piece]] for ends in (border.overlay.start, border.overlay.end))
    points = start + share * (end - start)
    extent = float(np.ptp(points, axis=0).max())
    points += _MOVED * extent * np.random.default_rng(0).uniform(-1.0, 1.0, points.shape)
    return points, np.arange(count) // _POINTS


def _surface(shape: Any, whole: ControlSurface) -> ControlSurface | None:
    """The part as a control surface that moves as the whole does; None where there is nothing."""
    import shapely

    parts = [
        part
        for part in shapely.get_parts(shape)
        if part.geom_type == "Polygon" and part.area > _SLIVER * shape.envelope.area
    ]
    if not parts:
        return None
    polygons = [[part.exterior.coords, *(hole.coords for hole in part.interiors)] for part in parts]
    drawn = ControlSurface("part", "polygon", polygon_rings(polygons, "The part"), True)
    return replace(drawn, motion=whole.motion)


def told_beside(parts: Sequence[Beside], scale: float | None, letters: str) -> str:
    """In words which parts of the volume stand out."""
    from fvcheck.text.numbers import percent

    if not parts or not scale:
        return ""
    out = sorted((p for p in parts if p.stands_out), key=lambda p: -abs(p.imbalance))
    if not out:
        return "no part of the volume has an imbalance beyond its resolution band"
    listed = ", ".join(
        f"{_name(p, letters)} {percent(100 * p.imbalance / scale)} % of the scale "
        f"(resolution band ±{percent(100 * p.resolution / scale)} %)"
        for p in out[:3]
    )
    return f"the imbalance beyond the resolution band sits beside {listed}"


def _name(part: Beside, letters: str) -> str:
    """Its stretch, such as "A–B"; behind the last letter the walk comes back to the first."""
    return f"{letters[part.number]}–{letters[(part.number + 1) % STRETCHES]}"
