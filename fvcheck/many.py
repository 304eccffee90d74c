"""Many control surfaces of one flow, sampled by fits that they share."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from fvcheck.flow import Flow
from fvcheck.laws import Law
from fvcheck.overlay.overlay import lay_over
from fvcheck.sampling.probe import compile_probe
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import SampledVolume

# Fitted points of a batch of surfaces; a fit takes some kilobytes.
_BATCH = 20_000


def sampled_volumes(
    flow: Flow,
    surfaces: Sequence[ControlSurface],
    laws: Sequence[Law],
    about: tuple[float, float] = (0.0, 0.0),
) -> Iterator[SampledVolume]:
    """The volumes of surfaces, in their order.

    A fit depends on the data around its point, not on the surface, so surfaces
    that run through the same points share it; a surface alone comes out the
    same. Memory is that of one batch. Raises SurfaceError for a surface
    outside the domain, FieldError for data that are no numbers near one.
    """
    batch: list[SampledVolume] = []
    size = 0
    for surface in surfaces:
        placed = surface.resolve(flow.mesh)
        volume = SampledVolume(flow, placed, lay_over(flow.mesh, placed), laws, about=about, sampled=False)
        if batch and size + len(volume.centres) > _BATCH:
            yield from _sampled(flow, batch)
            size = 0
        batch.append(volume)
        size += len(volume.centres)
    yield from _sampled(flow, batch)


def _sampled(flow: Flow, batch: list[SampledVolume]) -> Iterator[SampledVolume]:
    """The volumes of a batch, which is empty then."""
    if not batch:
        return
    probe = compile_probe(flow, np.unique(np.concatenate([volume.centres for volume in batch])))
    batch.reverse()
    while batch:
        volume = batch.pop()
        volume.sample(flow, probe)
        yield volume
