"""How no-slip walls move: not at all, along, or around a point."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np

from fvcheck.errors import LARGEST, SetupError, nearest

Array = np.ndarray


class Spin(NamedTuple):
    """A wall that turns counter-clockwise at ``omega`` [rad/s] about (x, y).

    In an axisymmetric run it turns about the axis, right-handed, wherever x and y are.
    """

    omega: float
    x: float = 0.0
    y: float = 0.0


Wall = tuple[float, float] | Spin
Walls = Mapping[str, Any] | Sequence[str]


def settled(told: Walls | None, names: Sequence[str]) -> dict[str, Wall]:
    """Patch -> how it moves, from what the user says.

    told : names of walls at rest; or name -> velocity (vx, vy), or a `Spin`, or
        {"omega": …, "centre": (x, y)}

    SetupError for a patch that is none of ``names``, and for other motions.
    """
    motions = (
        told if isinstance(told, Mapping) else dict.fromkeys([told] if isinstance(told, str) else told or ())
    )
    for name in motions:
        if name not in names:
            raise SetupError(
                f"there is no patch {name!r} to be a wall",
                mend=nearest(name, names) or f"Patches: {', '.join(names)}.",
            )
    return {name: _wall(name, motion) for name, motion in motions.items()}


def _wall(name: str, motion: Any) -> Wall:
    if motion is None:
        return 0.0, 0.0
    try:
        if isinstance(motion, Mapping):
            x, y = motion.get("centre", (0.0, 0.0))
            if set(motion) - {"omega", "centre"}:
                raise KeyError
            motion = Spin(motion["omega"], x, y)
        numbers = [float(value) for value in motion]
    except (TypeError, ValueError, KeyError):
        numbers = []
    spins = isinstance(motion, Spin)
    if len(numbers) != (3 if spins else 2) or not all(abs(value) < LARGEST for value in numbers):
        raise SetupError(
            f"the motion of the wall {name!r} is {motion}",
            mend="Give a velocity (VX, VY), or omega and centre of a spin.",
        )
    if spins:
        return Spin(*numbers) if numbers[0] else (0.0, 0.0)
    return numbers[0], numbers[1]


def wall_velocity(wall: Wall, places: Array, axis: int | None) -> Array:
    """(n, 3) velocity [m/s] of a wall at places (n, 2), its third component out of the plane.

    axis : of an axisymmetric run, where a spin is a velocity out of the plane
    """
    out = np.zeros((len(places), 3))
    if not isinstance(wall, Spin):
        out[:, :2] = wall
    elif axis is None:
        out[:, 0] = -wall.omega * (places[:, 1] - wall.y)
        out[:, 1] = wall.omega * (places[:, 0] - wall.x)
    else:
        # The third component points against the azimuth where the axis is y (`laws.places`).
        out[:, 2] = (1.0 if axis == 0 else -1.0) * wall.omega * places[:, 1 - axis]
    return out


def motion_text(wall: Wall) -> str:
    """The motion as the command line has it: nothing for a wall at rest."""
    if isinstance(wall, Spin):
        return f"spin({wall.omega:g}, {wall.x:g}, {wall.y:g})"
    return f"{wall[0]:g},{wall[1]:g}" if any(wall) else ""
