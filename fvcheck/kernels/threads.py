"""How many threads a compiled loop is worth."""

from __future__ import annotations

import numba

# Below so many items one thread does it in a few milliseconds. A second one would save half
# of them on an idle machine; on one whose cores are busy it must wait for a turn, which has
# been seen to make a ledger of 60 ms take 170.
_WORTH_IT = 2_000_000

_ALL = numba.get_num_threads()


def use_for(items: int) -> None:
    """Let the parallel loops that follow in this thread use all cores, or one for little work."""
    numba.set_num_threads(_ALL if items >= _WORTH_IT else 1)
