"""Which patch an edge belongs to, by what the file claims."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.claims import FACE, LINE, Claims

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Finder:
    """Claims, and where their points lie.

    used : (n,) raw points that cells use
    group : (n,) a number that points lying on the same place share
    place : (n,) the group at the place of a raw point, -1 where no boundary point is

    A claim on points of the cells goes by those points; a claim on points of
    its own (a patch block beside the mesh) goes by place.
    """

    claims: Claims
    used: Array
    group: Array
    place: Array

    def find(self, start: Array, end: Array, number: Array) -> tuple[Array, Array]:
        """Patch (e,) of the edges start -> end, -1 for none, and which claims (s,) met an edge.

        ``number`` (n,) is the present number of each raw point (its own, or
        that of the point it was merged into); start and end are such numbers.
        """
        claims, n = self.claims, len(number)
        group_of = np.full(n, -1, np.int64)
        group_of[number[self.used]] = self.group[self.used]
        patch = np.full(len(start), -1, np.int64)
        met = np.zeros(len(claims.ends), bool)
        own = self.used[claims.ends].all(axis=1) if len(met) else met
        for origin in (FACE, LINE):
            for by_point in (True, False):
                rows = np.flatnonzero((claims.origin == origin) & (own == by_point))
                if not by_point:
                    rows = rows[(self.place[claims.ends[rows]] >= 0).all(axis=1)]
                if len(rows) == 0:
                    continue
                if by_point:
                    wanted = _keys(number[claims.ends[rows]], n)
                    edges = _keys(np.column_stack([start, end]), n)
                else:
                    wanted = _keys(self.place[claims.ends[rows]], n)
                    edges = _keys(np.column_stack([group_of[start], group_of[end]]), n)
                met[rows] = np.isin(wanted, edges)
                rows, wanted = rows[claims.patch[rows] >= 0], wanted[claims.patch[rows] >= 0]
                if len(rows) == 0:
                    continue
                distinct, first = np.unique(wanted, return_index=True)
                at = np.minimum(np.searchsorted(distinct, edges), len(distinct) - 1)
                hit = (distinct[at] == edges) & (patch < 0)
                patch[hit] = claims.patch[rows[first[at[hit]]]]
            if origin == FACE:
                self._find_by_vertices(patch, start, end, group_of, number)
        return patch, met

    def _find_by_vertices(self, patch: Array, start: Array, end: Array, group: Array, number: Array) -> None:
        for name, points in self.claims.vertices:
            inside = np.zeros(len(number), bool)
            inside[number[points[self.used[points]]]] = True
            there = np.zeros(len(number) + 1, bool)  # the last entry stands for "no place"
            there[self.place[points[~self.used[points]]]] = True
            there[-1] = False
            all_in = (inside[start] | there[group[start]]) & (inside[end] | there[group[end]])
            patch[all_in & (patch < 0)] = name


def _keys(ends: Array, n: int) -> Array:
    """One number for each pair (e, 2) of numbers below n, the same both ways round."""
    return np.minimum(ends[:, 0], ends[:, 1]) * n + np.maximum(ends[:, 0], ends[:, 1])
