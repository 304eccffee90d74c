"""How many threads a compiled loop is worth."""

from __future__ import annotations

import numba

# Below so many items waking a second thread costs more than it saves, and on a
# machine whose cores are busy far more: a loop of 0.1 ms then waits for 50 ms.
_WORTH_IT = 30_000

_ALL = numba.get_num_threads()


def use_for(items: int) -> None:
    """Let the parallel loops that follow in this thread use all cores, or one for little work."""
    numba.set_num_threads(_ALL if items >= _WORTH_IT else 1)
