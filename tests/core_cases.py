"""Meshes and flows that the tests of the core share."""

from __future__ import annotations

import numpy as np
import trial_meshes as tm
from exact_data import flow_data

from fvcheck import Flow, Fluid
from fvcheck.formats.check import check_piece
from fvcheck.mesh.assemble import assemble
from fvcheck.mesh.piece import Piece

POLYGON = 7
UNIT = (0.0, 0.0, 1.0, 1.0)
FIELDS = {"velocity": "U", "pressure": "p", "temperature": "T", "density": "rho"}


def mesh_of(cells):
    """The plane mesh of trial cells, hanging nodes inserted."""
    return assemble([check_piece(piece_of(cells), "trial")]).mesh


def piece_of(cells, **data):
    points = np.column_stack([cells.points, np.zeros(len(cells.points))])
    types = np.full(len(cells.sizes), POLYGON, np.uint8)
    return Piece(points=points, types=types, offsets=cells.offsets, nodes=cells.nodes, **data)


def concave_cells(n=5):
    """A square of n × n blocks, each an L of six corners and the square that fills its notch."""
    lattice = {}
    polygons = []

    def at(i, j):
        return lattice.setdefault((i, j), len(lattice))

    for i in range(0, 2 * n, 2):
        for j in range(0, 2 * n, 2):
            low = [at(i, j), at(i + 1, j), at(i + 2, j)]
            mid = [at(i, j + 1), at(i + 1, j + 1), at(i + 2, j + 1)]
            top = [at(i, j + 2), at(i + 1, j + 2), at(i + 2, j + 2)]
            polygons.append([*low, mid[2], mid[1], top[1], top[0], mid[0]])
            polygons.append([mid[1], mid[2], top[2], top[1]])
    return tm.from_lists(np.array(list(lattice), float) / (2 * n), polygons)


def meshes(seed=0):
    """name -> cells: every kind of mesh on the unit square, and two with a hole in it."""
    return {
        "triangles": tm.triangles(UNIT, 0.17, seed),
        "quads": tm.quads(UNIT, 0.17, seed),
        "even quads": tm.quads(UNIT, 0.125, seed, jitter=0.0),
        "mixed": tm.mixed(UNIT, 0.17, seed),
        "polygons": tm.polygons(UNIT, 0.2, seed),
        "quadtree": tm.quadtree(UNIT, 0.25, levels=2),
        "concave": concave_cells(),
        "annulus": tm.mapped(tm.annulus(0.25, 1.0, 0.15, "triangles", seed), lambda p: 0.5 + 0.5 * p),
        "holed": tm.with_hole(UNIT, (0.45, 0.55, 0.15), 0.17, 0.08, seed=seed),
    }


def flow_on(exact, cells, where="point", fluid=None, **settings):
    """A flow that holds an exact field on trial cells."""
    data = {FIELDS[role]: values for role, values in flow_data(exact, cells, where).items()}
    kind = "point_data" if where == "point" else "cell_data"
    return Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        **{kind: data},
        fluid=Fluid(**exact.fluid) if fluid is None else fluid,
        cell_values="centroid" if where == "centroid" else "average",
        **settings,
    )
