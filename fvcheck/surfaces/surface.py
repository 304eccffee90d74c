"""The control surface: outlines in the plane, and how they move."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from fvcheck.errors import LARGEST, SurfaceError, nearest
from fvcheck.surfaces import rings as _rings

if TYPE_CHECKING:
    from fvcheck.mesh.mesh import Mesh

Array = np.ndarray


@dataclass(frozen=True)
class Motion:
    """Rigid motion of a surface: ``velocity`` plus ``omega`` (counter-clockwise, 1/s) about ``centre``."""

    velocity: tuple[float, float] = (0.0, 0.0)
    omega: float = 0.0
    centre: tuple[float, float] = (0.0, 0.0)

    def __post_init__(self) -> None:
        if len(self.velocity) != 2 or len(self.centre) != 2:
            raise SurfaceError("A motion needs a velocity (wx, wy) and a centre (x, y)")
        wx, wy, omega, x, y = _rings.finite([*self.velocity, self.omega, *self.centre], "The motion")
        if max(map(abs, (wx, wy, omega, x, y))) >= LARGEST:
            raise SurfaceError(f"the motion {self.text} is none of a flow's size")
        object.__setattr__(self, "velocity", (wx, wy))
        object.__setattr__(self, "omega", omega)
        # Without a spin the centre means nothing; equal motions then compare and are spelled alike.
        object.__setattr__(self, "centre", (x, y) if omega else (0.0, 0.0))

    def at(self, x: Array) -> Array:
        """(n, 2) boundary velocity w = velocity + omega e_z × (x − centre) at points x (n, 2)."""
        arm = np.asarray(x, dtype=np.float64) - self.centre
        return self.velocity + self.omega * np.stack([-arm[:, 1], arm[:, 0]], axis=1)

    @property
    def text(self) -> str:
        """Spelling as it follows a shape, such as ``@ velocity(1, 0)``."""
        parts = []
        if self.velocity != (0.0, 0.0) or self.omega == 0.0:
            parts.append(f"@ velocity({_numbers(*self.velocity)})")
        if self.omega != 0.0:
            parts.append(f"@ spin({_numbers(self.omega, *self.centre)})")
        return " ".join(parts)


@dataclass(frozen=True, eq=False, repr=False)
class ControlSurface:
    """What the user draws: closed outlines of a volume, or open lines.

    name : unique name in a ledger; may be empty until `name_all` gives one
    kind : "box", "circle", "ellipse", "polygon", "line", "around", "domain",
        "patch", "file" or "wkt"
    rings : (n, 2) float64 polylines. Closed: each exterior ring
        (counter-clockwise, so that the outward normal is to the right of the
        drawn direction) followed by its holes (clockwise), first point not
        repeated. Open: in drawn order, the normal to the right of it. Empty for
        "domain" and "patch", and for "around" until resolved
    closed : bounds a volume; open surfaces (lines and patches) give fluxes only
    motion : of the surface, or None at rest
    target, distance : body or patch, and distance from it, of "around" and "patch"
    shape : canonical spelling of the shape where ``rings`` does not say it
    """

    name: str
    kind: str
    rings: tuple[Array, ...]
    closed: bool
    motion: Motion | None = None
    target: str = ""
    distance: float = 0.0
    shape: str = ""

    def __repr__(self) -> str:
        return f"<ControlSurface {self.text}>"

    def __post_init__(self) -> None:
        if any(mark in self.name for mark in '"\n\r'):
            raise SurfaceError(
                f"A surface cannot be named {self.name!r}", mend="Leave quotes and line ends out."
            )

    @classmethod
    def box(
        cls, x0: float, y0: float, x1: float, y1: float, *, name: str = "", motion: Motion | None = None
    ) -> ControlSurface:
        """Rectangle between two opposite corners."""
        ring = _rings.box_ring(*_rings.finite([x0, y0, x1, y1], "The box"))
        shape = f"box({_numbers(*ring[0], *ring[2])})"
        return cls(name, "box", (ring,), True, motion, shape=shape)

    @classmethod
    def circle(
        cls, x: float, y: float, r: float, *, name: str = "", motion: Motion | None = None
    ) -> ControlSurface:
        """Circle of radius r: 720 chords, pushed outward to the exact area (why: `rings.ellipse_ring`).

        The vertices of an inscribed polygon would make the area 1.3e-5 too small
        and leave every chord inside the circle, a one-sided error in each flux.
        """
        x, y, r = _rings.finite([x, y, r], "The circle")
        ring = _rings.ellipse_ring(x, y, r, r, 0.0, "The circle")
        return cls(name, "circle", (ring,), True, motion, shape=f"circle({_numbers(x, y, r)})")

    @classmethod
    def ellipse(
        cls,
        x: float,
        y: float,
        a: float,
        b: float,
        degrees: float = 0.0,
        *,
        name: str = "",
        motion: Motion | None = None,
    ) -> ControlSurface:
        """Ellipse of half axes a and b, a turned by ``degrees``: 720 chords of exact area, as `circle`."""
        x, y, a, b, degrees = _rings.finite([x, y, a, b, degrees], "The ellipse")
        ring = _rings.ellipse_ring(x, y, a, b, degrees, "The ellipse")
        arguments = (x, y, a, b, degrees) if degrees else (x, y, a, b)
        return cls(name, "ellipse", (ring,), True, motion, shape=f"ellipse({_numbers(*arguments)})")

    @classmethod
    def polygon(cls, points: Any, *, name: str = "", motion: Motion | None = None) -> ControlSurface:
        """Simple polygon through (n, 2) points, in either direction; the last may repeat the first."""
        rings = _rings.polygon_rings([[points]], f"The polygon {name!r}" if name else "The polygon")
        return cls(name, "polygon", rings, True, motion)

    @classmethod
    def line(cls, points: Any, *, name: str = "", motion: Motion | None = None) -> ControlSurface:
        """Open polyline through (n, 2) points; its normal points to the right of its direction."""
        chain = _rings.polyline(points, f"The line {name!r}" if name else "The line")
        return cls(name, "line", (chain,), False, motion)

    @classmethod
    def around(
        cls, body: str, distance: float, *, name: str = "", motion: Motion | None = None
    ) -> ControlSurface:
        """All that lies within ``distance`` of a body (or another patch), the body included."""
        (distance,) = _rings.finite([distance], f"around({body}, …)")
        if distance <= 0:
            raise SurfaceError(
                f"around({body}, {_numbers(distance)}) needs a distance above zero",
                mend=f"For fluxes through the body itself write patch({body}).",
            )
        return cls(name, "around", (), True, motion, target=body, distance=distance)

    @classmethod
    def domain(cls, *, name: str = "", motion: Motion | None = None) -> ControlSurface:
        """The whole meshed domain; nothing is drawn, its boundary is the mesh's."""
        return cls(name, "domain", (), True, motion)

    @classmethod
    def patch(cls, target: str, *, name: str = "", motion: Motion | None = None) -> ControlSurface:
        """One patch of the domain boundary: fluxes only."""
        return cls(name, "patch", (), False, motion, target=target)

    @classmethod
    def from_file(
        cls,
        path: str | Path,
        *,
        base: str | Path | None = None,
        name: str = "",
        motion: Motion | None = None,
    ) -> ControlSurface:
        """Outlines from GeoJSON, WKT or two-column CSV; ``path`` is relative to ``base`` or here."""
        from fvcheck.surfaces.drawing import read_drawing

        rings, closed = read_drawing(Path(base or ".") / path)
        return cls(name, "file", rings, closed, motion, shape=f"file({_quoted(str(path))})")

    @classmethod
    def from_wkt(cls, text: str, *, name: str = "", motion: Motion | None = None) -> ControlSurface:
        """Outlines from well-known text: (multi)polygons, holes included, or (multi)linestrings."""
        from fvcheck.surfaces.drawing import wkt_rings

        rings, closed = wkt_rings(text)
        return cls(name, "wkt", rings, closed, motion)

    @classmethod
    def parse(cls, text: str, *, name: str = "", base: str | Path | None = None) -> ControlSurface:
        """Surface from ``NAME=KIND(ARGUMENTS) @ velocity(wx, wy)``; NAME= and the motion may be left out.

        ``name`` holds where the text gives none; ``base`` is the folder of ``file(PATH)``.
        """
        from fvcheck.surfaces.spelling import parse

        return parse(text, name=name, base=base)

    def resolve(self, mesh: Mesh) -> ControlSurface:
        """The surface on a mesh: the outline of "around" drawn, the patch of "patch" known to exist.

        The outline of "around" is the round-cornered buffer of the patch's edges.
        Around a body nothing inside it is left out (no holes). Around a patch
        that closes no hole in the domain, such as a bump on a wall, it is the
        buffer of the open chain, and of an outer wall the strip along it.
        """
        if self.kind not in ("around", "patch"):
            return self
        known = mesh.boundary.names
        if self.target not in known:
            raise SurfaceError(
                f"There is no patch {self.target!r}",
                where=f"{self.text}; patches: {', '.join(known) or 'none'}",
                mend=nearest(self.target, known),
            )
        if self.kind == "patch":
            return self
        edges = mesh.points[mesh.patch_edges(self.target)]
        return replace(self, rings=_buffer(edges, self.distance, self.target in mesh.bodies, self.text))

    @property
    def length(self) -> float | None:
        """Length of the drawn outlines, None where nothing is drawn."""
        if not self.rings:
            return None
        return sum(_rings.path_length(ring, self.closed) for ring in self.rings)

    @property
    def area(self) -> float | None:
        """Area within the drawn outlines (shoelace, holes taken off), None for open ones."""
        if not self.closed or not self.rings:
            return None
        return sum(_rings.signed_area(ring) for ring in self.rings)

    @cached_property
    def text(self) -> str:
        """Canonical spelling; `parse` makes the same surface of it."""
        plain = (
            self.name and not any(mark in self.name for mark in "=()@'") and self.name == self.name.strip()
        )
        name = f"{self.name}=" if plain else f'"{self.name}"=' if self.name else ""
        return " ".join([name + self._shape_text(), *([self.motion.text] if self.motion else [])])

    def _shape_text(self) -> str:
        if self.shape:
            return self.shape
        match self.kind:
            case "domain":
                return "domain()"
            case "patch":
                return f"patch({_quoted(self.target)})"
            case "around":
                return f"around({_quoted(self.target)}, {_numbers(self.distance)})"
        if len(self.rings) == 1:
            points = self.rings[0]
            return f"{'polygon' if self.closed else 'line'}({_point_list(points)})"
        if not self.closed:
            return f"MULTILINESTRING ({', '.join(f'({_point_list(ring)})' for ring in self.rings)})"
        polygons: list[list[str]] = []
        for ring in self.rings:
            if _rings.signed_area(ring) > 0:
                polygons.append([])
            polygons[-1].append(f"({_point_list([*ring, ring[0]])})")
        return f"MULTIPOLYGON ({', '.join('(' + ', '.join(polygon) + ')' for polygon in polygons)})"


def _buffer(edges: Array, distance: float, body: bool, text: str) -> tuple[Array, ...]:
    """Rings of all points within ``distance`` of edges (e, 2, 2); without holes around a body."""
    import shapely

    if len(edges) == 0:
        raise SurfaceError(f"The patch has no edges to go around ({text})")
    # Chained first: loose segments would each get round caps, at many times the cost.
    chains = shapely.line_merge(shapely.MultiLineString(list(edges)))
    shape = shapely.buffer(chains, distance, quad_segs=48, join_style="round", cap_style="round")
    parts = [part for part in shapely.get_parts(shape) if not part.is_empty]
    if body:
        parts = [shapely.Polygon(part.exterior) for part in parts]
        # A small part may have lain in a hole of a larger one.
        parts = list(shapely.get_parts(shapely.union_all(parts)))
    polygons = [[part.exterior.coords, *(hole.coords for hole in part.interiors)] for part in parts]
    if not polygons:
        raise SurfaceError(f"Nothing is left to draw {text}", mend="Give a distance the mesh can resolve.")
    return _rings.polygon_rings(polygons, text)


def _numbers(*values: float) -> str:
    """Shortest digits that read back to the same number, ``1`` for 1.0."""
    return ", ".join(repr(float(value)).removesuffix(".0") for value in values)


def _point_list(points: Sequence[Array] | Array) -> str:
    return ", ".join(_numbers(x) + " " + _numbers(y) for x, y in points)


def _quoted(name: str) -> str:
    """A name as an argument: in quotes where it would otherwise be read differently."""
    bare = name == name.strip() and name[:1] not in ("", "'", '"')
    return name if bare else f'"{name}"'
