"""Which coordinate of an axisymmetric run is its axis."""

from __future__ import annotations

from fvcheck.errors import MeshError, SetupError
from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly
from fvcheck.mesh.mesh import Mesh
from fvcheck.mesh.plane import FLAT

SYMMETRIES = ("planar", "axisymmetric")


def axis_of(symmetry: str, wanted: str, assembly: Assembly) -> tuple[int | None, tuple[Hint, ...]]:
    """Number (0, 1) of the in-plane coordinate that runs along the axis; None for a plane run.

    wanted : "auto", or the name of the coordinate: "x" or "y", also as the plane
        calls them. A wedge knows its axis, and is axisymmetric without being told.
        Otherwise it is the first coordinate, unless only the second can be it, as
        all radii must be zero or more, or only on the second one is there a boundary.

    SetupError for a wrong name, MeshError for a mesh on both sides of the axis.
    """
    if symmetry not in SYMMETRIES:
        raise SetupError(f"unknown symmetry {symmetry!r}", mend="Use planar or axisymmetric.")
    if assembly.wedge is not None:
        note = Hint(
            "wedge",
            "the cells lie between two planes that meet in a line: the run is taken as axisymmetric "
            f"about {_name(assembly.wedge, assembly)}, results are for the whole turn",
        )
        return assembly.wedge, (note,)
    if symmetry == "planar":
        if wanted != "auto":
            raise SetupError("an axis goes with axisymmetric runs only", mend="Add --axisymmetric.")
        return None, ()
    if wanted != "auto":
        number = _number(wanted, assembly)
        if not _fits(assembly.mesh, number):
            raise MeshError(
                f"the mesh lies on both sides of the axis {wanted}",
                where=f"radii from {_lowest(assembly.mesh, number):.6g}",
                mend="Give the other axis, or export one half with radii of zero or more.",
            )
        return number, ()
    possible = [number for number in (0, 1) if _fits(assembly.mesh, number)]
    if not possible:
        raise MeshError(
            "an axisymmetric mesh needs radii of zero or more, but this one lies on both sides of both axes",
            mend="Export one half, with the axis at x = 0 or y = 0.",
        )
    if len(possible) == 1:
        return possible[0], ()
    touching = [number for number in possible if abs(_lowest(assembly.mesh, number)) <= _slack(assembly.mesh)]
    number = touching[0] if len(touching) == 1 else 0
    other = _name(1 - number, assembly)
    return number, (
        Hint("axis-taken", f"{_name(number, assembly)} is taken as the axis; for {other}: --axis {other}"),
    )


def _name(number: int, assembly: Assembly) -> str:
    return assembly.plane[number] if assembly.plane in ("xy", "xz", "yz") else "xy"[number]


def _number(wanted: str, assembly: Assembly) -> int:
    names = [_name(number, assembly) for number in (0, 1)]
    for spelling in (names, ["x", "y"]):
        if wanted in spelling:
            return spelling.index(wanted)
    raise SetupError(f"unknown axis {wanted!r}", mend=f"Use auto, {names[0]} or {names[1]}.")


def _slack(mesh: Mesh) -> float:
    x0, y0, x1, y1 = mesh.bounds
    return FLAT * max(x1 - x0, y1 - y0)


def _lowest(mesh: Mesh, axis: int) -> float:
    """The smallest radius if coordinate ``axis`` runs along the axis."""
    return float(mesh.bounds[1 - axis])


def _fits(mesh: Mesh, axis: int) -> bool:
    return _lowest(mesh, axis) >= -_slack(mesh)
