"""The border of a control volume in walking order, and what each of its pieces contributes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from fvcheck.bands import Crosswise, bands, steps_of
from fvcheck.entries import pieces_of
from fvcheck.laws import Law
from fvcheck.overlay.pieces import Overlay
from fvcheck.sampling.quadrature import PER_PIECE
from fvcheck.sampling.sampler import DEGREES
from fvcheck.volume import BEST

if TYPE_CHECKING:
    from fvcheck.volume import SampledVolume

Array = np.ndarray

# Ends of pieces meet to this share of the extent of the border.
_MEET = 1e-7


@dataclass(frozen=True, eq=False)
class Border:
    """Pieces in walking order, chain after chain.

    order : (n,) number of each piece in the overlay
    chain : (n,) number of the chain
    at : (n+1,) distance walked [m] at the start of each piece, and at the end
    """

    overlay: Overlay
    order: Array
    chain: Array
    at: Array

    @property
    def length(self) -> float:
        return float(self.at[-1])

    @property
    def middle(self) -> Array:
        """(n, 2) of each piece."""
        return 0.5 * (self.overlay.start + self.overlay.end)[self.order]

    @property
    def normal(self) -> Array:
        """(n, 2) outward unit normals."""
        normals = self.overlay.normals[self.order]
        return normals / np.maximum(np.hypot(*normals.T), 1e-300)[:, None]

    @property
    def patch(self) -> Array:
        """(n,) as in `Overlay.patch`."""
        return self.overlay.patch[self.order]

    def runs(self) -> list[tuple[float, float, int]]:
        """(from, to, patch) of stretches that lie on one patch, or are drawn."""
        if len(self.order) == 0:
            return []
        key = np.column_stack([self.patch, self.chain])
        cuts = np.flatnonzero(np.any(key[1:] != key[:-1], axis=1)) + 1
        first = np.concatenate([[0], cuts])
        last = np.concatenate([cuts, [len(self.order)]])
        return [(float(self.at[a]), float(self.at[b]), int(self.patch[a])) for a, b in zip(first, last)]

    def bins(self, count: int) -> Array:
        """(n,) number of the bin of each piece: ``count`` of about equal length, none over two chains."""
        if len(self.order) == 0 or self.length == 0:
            return np.zeros(len(self.order), np.int64)
        middle = 0.5 * (self.at[1:] + self.at[:-1])
        out = np.zeros(len(self.order), np.int64)
        used = 0
        for chain in range(int(self.chain[-1]) + 1):
            here = np.flatnonzero(self.chain == chain)
            low, high = self.at[here[0]], self.at[here[-1] + 1]
            size = max(high - low, 1e-300)
            mine = max(4, round(count * size / self.length))
            out[here] = used + np.clip((middle[here] - low) / size * mine, 0, mine - 1).astype(int)
            used += mine
        return np.unique(out, return_inverse=True)[1]


def border_of(overlay: Overlay) -> Border:
    """Walk the pieces: each is followed by one that starts where it ends."""
    n = len(overlay.start)
    if n == 0:
        none = np.empty(0, np.int64)
        return Border(overlay, none, none, np.zeros(1))
    after = _followers(overlay)
    begins = np.setdiff1d(np.arange(n), after[after >= 0])
    order, chain, seen, count = [], [], np.zeros(n, bool), 0
    for first in [*begins.tolist(), *range(n)]:
        if seen[first]:
            continue
        piece = _corner(overlay, after, first)
        while piece >= 0 and not seen[piece]:
            seen[piece] = True
            order.append(piece)
            chain.append(count)
            piece = int(after[piece])
        count += 1
    lengths = overlay.lengths[order]
    return Border(overlay, np.array(order), np.array(chain), np.concatenate([[0.0], np.cumsum(lengths)]))


def _followers(overlay: Overlay) -> Array:
    """(n,) the piece that goes on where each ends, -1 for none; no piece follows two."""
    from scipy.spatial import cKDTree

    n = len(overlay.start)
    extent = float(np.ptp(overlay.start, axis=0).max()) or 1.0
    apart, near = cKDTree(overlay.start).query(overlay.end, k=min(4, n), distance_upper_bound=_MEET * extent)
    near, apart = np.asarray(near).reshape(n, -1), np.asarray(apart).reshape(n, -1)
    after, taken = np.full(n, -1), np.zeros(n, bool)
    for piece in range(n):
        for other, far in zip(near[piece], apart[piece]):
            # Tiny pieces end near their own start.
            if np.isfinite(far) and other != piece and not taken[other]:
                after[piece], taken[other] = other, True
                break
    return after


def _corner(overlay: Overlay, after: Array, first: int) -> int:
    """Where to begin a chain: a closed one at its lower left, so that drawings of one shape agree."""
    ring, piece = [first], int(after[first])
    while piece >= 0 and piece != first:
        ring.append(piece)
        piece = int(after[piece])
    if piece < 0:
        return first
    places = overlay.start[ring]
    return ring[int(np.argmin(places.sum(axis=1)))]


@dataclass(frozen=True, eq=False)
class Along:
    """One row of a law along a border, in its walking order.

    flux : (n,) through each piece in the law's unit, outward positive, without what no closed
        surface feels (the mean pressure)
    sampling, resolution : (n,) what each piece adds to the bands of the fluxes; they add up to
        them together with ``inside`` (sampling, resolution), what the volume terms add
    degree : (n,) of the polynomials that the data support there
    """

    border: Border
    label: str
    unit: str
    flux: Array
    sampling: Array
    resolution: Array
    degree: Array
    inside: tuple[float, float]

    @property
    def density(self) -> Array:
        """(n,) flux per metre of border."""
        lengths = np.diff(self.border.at)
        return np.divide(self.flux, lengths, out=np.zeros_like(self.flux), where=lengths > 0)


def along_border(volume: SampledVolume, law: Law, border: Border) -> list[Along]:
    """Each component of a law along the border of a sampled volume."""
    degrees = [volume.contributions(law, degree) for degree in DEGREES]
    best = volume.contributions(law, BEST) if volume.falls else degrees[-1]
    closed = volume.overlay.closed
    level = best.level if closed else 0.0
    felt = best.total - level
    per_piece = felt.reshape(len(volume.overlay.start), PER_PIECE, -1).sum(axis=1)
    group = volume.line_group[::PER_PIECE]
    lengths = volume.overlay.lengths
    whole = np.bincount(group, lengths)
    share = np.divide(lengths, whole[group], out=np.zeros_like(lengths), where=whole[group] > 0)
    degree = volume.line.supported[group]
    out = []
    cross = volume.crosswise(law)
    for c, component in enumerate(law.components):
        pieces = [pieces_of(volume, found, c) for found in (*degrees, best)]
        reaching = volume.reaching(law)
        first, second, third, chosen = pieces
        fallen = chosen if volume.falls else None
        sampling, resolution = shares(
            first, second, third, fallen, reaching, Crosswise(cross[:, c], volume.beside)
        )
        lines = len(whole)
        out.append(
            Along(
                border,
                law.name if component is None else f"{law.name}-{component}",
                law.unit if volume.flow.case.per_metre else law.unit.removesuffix("/m"),
                per_piece[border.order, c],
                (sampling[group] * share)[border.order],
                (resolution[group] * share)[border.order],
                degree[border.order],
                (float(sampling[lines:].sum()), float(resolution[lines:].sum())),
            )
        )
    return out


def shares(
    first: Array, second: Array, third: Array, chosen: Array | None, reaching: Array, cross: Crosswise
) -> tuple[Array, Array]:
    """What each term adds to the sampling and to the resolution band; sums are `bands` without rounding.

    Where a band is a root of squares its terms share it by their squares, where it is a sum, by size.
    """
    steps = steps_of(first, second, third, chosen, reaching, cross)
    whole = bands(first, second, third, 0.0, chosen, reaching, cross)
    sampling = np.where(steps.outside, steps.outer_widths, 0.0)
    rest = max(whole.sampling - float(sampling.sum()), 0.0)
    within = ~steps.outside
    d12, d23 = steps.d12, steps.d23[within]
    sampling[within] = _split(rest, np.abs(d23) if steps.unsettled else d23**2 + steps.apart[within] ** 2)
    return sampling, _split(whole.resolution, d12**2 if np.any(d12) else sampling)


def _split(amount: float, weights: Array) -> Array:
    total = weights.sum()
    return amount * weights / total if total > 0 else np.zeros(len(weights))
