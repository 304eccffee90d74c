"""What is studied: exact fields on meshes of three sizes, and on one that is too coarse for them."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace

import exact
import exact_data
import numpy as np
import trial_meshes as tm
from exact import ExactFlow
from trial_meshes import Cells

from fvcheck import Flow, Fluid

Array = np.ndarray

SIZES = ("coarse", "middle", "fine")
UNDER = "under-resolved"
LOCATIONS = ("point", "average")
PRECISIONS = ("float64", "float32")

# Cell size in feature lengths l, where the field behaves like sin(x/l): 0.5 is
# 12.6 cells a wave, 0.18 is 35.
_RESOLVED = {"coarse": 0.5, "middle": 0.3, "fine": 0.18}

_NAMES = {"velocity": "U", "pressure": "p", "temperature": "T", "density": "rho"}
_KINDS = ("triangles", "mixed", "polygons")


@dataclass(frozen=True, eq=False)
class Subject:
    """An exact field, and the meshes it is studied on.

    h : size name -> cell size [m] (along the wall, for the boundary layer)
    smooth : no jump, so that a higher degree must pay
    unit : (x, y) lengths that control surfaces are drawn in
    """

    exact: ExactFlow
    laws: tuple[str, ...]
    h: Mapping[str, float]
    kinds: tuple[str, ...] = _KINDS
    locations: tuple[str, ...] = LOCATIONS
    smooth: bool = True
    unit: tuple[float, float] = (1.0, 1.0)
    name: str = field(default="")

    def cells(self, kind: str, size: str, seed: int) -> Cells:
        """The mesh of a kind and size."""
        if self.exact.name == "suction-layer":
            return tm.boundary_layer(self.exact.domain, self.h[size], ASPECT, kind=kind, seed=seed)
        return exact_data.mesh_for(self.exact, kind, self.h[size], seed)


ASPECT = 2500.0


def _subject(
    flow: ExactFlow, laws: tuple[str, ...] = ("mass", "momentum"), under: float = 0.9, **more
) -> Subject:
    h = {size: flow.feature * share for size, share in {**_RESOLVED, UNDER: under}.items()}
    x0, y0, x1, y1 = flow.domain
    short = min(x1 - x0, y1 - y0)
    return Subject(flow, laws, h, unit=(short, short), name=flow.name, **more)


def subjects() -> dict[str, Subject]:
    """Name -> subject, the whole suite."""
    thin = exact.suction_layer(length=100.0)
    x0, y0, x1, y1 = thin.domain
    gas = ("mass", "momentum", "total-energy")
    out = (
        _subject(exact.kovasznay()),
        _subject(exact.taylor_green(), under=2 * np.pi / 8),
        _subject(exact.hiemenz()),
        _subject(exact.jeffery_hamel()),
        _subject(exact.lamb_oseen()),
        _subject(exact.cylinder(), kinds=("triangles", "mixed")),
        # The layer is 2 features thick: 1.5 cells across it.
        _subject(replace(exact.shear_layer(), domain=(-0.5, -0.5, 0.5, 0.5)), under=2 / 1.5),
        replace(
            _subject(thin, ("mass", "momentum", "heat"), under=1.0, kinds=("triangles", "mixed")),
            # The lowest cells are a share of the thickness high and 2,500 times as long.
            h={size: ASPECT * share * thin.feature for size, share in {**_RESOLVED, UNDER: 1.0}.items()},
            unit=(x1 - x0, y1 - y0),
        ),
        _subject(replace(exact.isentropic_vortex(), domain=(-3.5, -3.5, 3.5, 3.5)), gas),
        replace(
            _subject(exact.oblique_shock(), gas, locations=("average",), smooth=False),
            h={"coarse": 0.1, "middle": 0.07, "fine": 0.05},
        ),
    )
    return {subject.name: subject for subject in out}


@dataclass(frozen=True, eq=False)
class Setting:
    """One cell of the study."""

    subject: Subject
    kind: str
    location: str
    precision: str
    size: str

    @property
    def resolved(self) -> bool:
        return self.subject.smooth and self.size != UNDER

    @property
    def key(self) -> tuple[str, str, str, str, str]:
        return self.subject.name, self.kind, self.location, self.precision, self.size

    @property
    def dtype(self) -> type:
        return np.float32 if self.precision == "float32" else np.float64


def settings(only: tuple[str, ...] = (), sizes: tuple[str, ...] = ()) -> Iterator[Setting]:
    """All cells of the study, or those whose field, mesh, location, precision are named in ``only``."""
    for subject in subjects().values():
        for kind, location, precision, size in itertools.product(
            subject.kinds, subject.locations, PRECISIONS, subject.h
        ):
            setting = Setting(subject, kind, location, precision, size)
            axes = (set(subjects()), set(_KINDS), set(LOCATIONS), set(PRECISIONS))
            wanted = all(
                not (names := axis.intersection(only)) or value in names
                for axis, value in zip(axes, setting.key)
            )
            if wanted and (not sizes or size in sizes):
                yield setting


def mesh_of(setting: Setting, seed: int = 0) -> Cells:
    """The mesh, its points in the precision of the setting, as a file would store them."""
    cells = setting.subject.cells(setting.kind, setting.size, seed)
    return cells._replace(points=cells.points.astype(setting.dtype).astype(float))


def flow_of(setting: Setting, cells: Cells) -> Flow:
    """The exact field on the mesh, as an export would hold it."""
    flow = setting.subject.exact
    data = {_NAMES[role]: v for role, v in exact_data.flow_data(flow, cells, setting.location).items()}
    told = {}
    for role, name, parts in _extras(flow):
        data[name] = sample(parts, cells, setting.location)
        told[role] = name
    data = {name: values.astype(setting.dtype) for name, values in data.items()}
    kind = "point_data" if setting.location == "point" else "cell_data"
    fluid = Fluid(**flow.fluid)
    points = cells.points.astype(setting.dtype)
    return Flow.from_arrays(points, (cells.offsets, cells.nodes), **{kind: data}, fields=told, fluid=fluid)


def _extras(flow: ExactFlow):
    """(role, array name, functions) of what makes an unsteady or driven field balance."""
    if {"u", "v"} <= set(flow.rates):
        yield "rate:velocity", "U_rate", (flow.rates["u"], flow.rates["v"])
    if flow.body_force is not None:
        yield "body_force", "force", flow.body_force


def sample(parts, cells: Cells, location: str, degree: int = 11) -> Array:
    """(n, k) values at points, or averages over cells, of k functions."""

    def both(x, y):
        return np.stack([part(x, y) + 0.0 * x for part in parts], axis=-1)

    if location == "point":
        return both(*cells.points.T)
    return tm.cell_averages(both, cells, degree)
