"""Where a state is taken: places, fields there, and what the geometry of the run adds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from fvcheck.fluid import Fluid
from fvcheck.sampling.sampled import Sampled

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Datum:
    """Levels that cannot matter to a closed balance: means on its border.

    scalars : name -> mean of a transported scalar
    """

    pressure: float = 0.0
    temperature: float = 0.0
    entropy: float = 0.0
    scalars: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Places:
    """Fields at q places.

    fluid : properties; ``fields`` : role -> `Sampled`; ``x`` : (q, 2) places.
    about : the point that angular momentum of a plane run counts from
    axis : None for a plane run; in an axisymmetric one 0 or 1, the coordinate
        that runs along the axis. The other one is the radius r, and the azimuth
        θ turns so that (axial, radial, θ) is right-handed for the x axis and
        (radial, axial, θ) left-handed for the y axis: right-handed about both
    """

    fluid: Fluid
    fields: Mapping[str, Sampled]
    x: Array
    datum: Datum = field(default_factory=Datum)
    about: tuple[float, float] = (0.0, 0.0)
    axis: int | None = None

    @cached_property
    def radius(self) -> Array:
        """(q,) distance from the axis of an axisymmetric run [m]."""
        assert self.axis is not None
        return self.x[:, 1 - self.axis]

    @cached_property
    def per_radius(self) -> Array:
        """(q,) 1/r, zero on the axis, where every weight 2πr vanishes."""
        away = self.radius > 1e-12 * np.abs(self.x).max(initial=0.0)
        return np.where(away, 1.0 / np.where(away, self.radius, 1.0), 0.0)

    @property
    def turn(self) -> float:
        """Sign of θ against the normal of the plane: the swirl u_θ is this times the third component."""
        return 1.0 if self.axis == 0 else -1.0

    @property
    def arm(self) -> Array:
        """(q, 2) places seen from the point that angular momentum counts from [m]."""
        return self.x - np.asarray(self.about)
