"""What sampling returns."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

Array = np.ndarray


class Sampled(NamedTuple):
    """A field at q places: values (q,) or (q, 3), gradients (q, 2) or (q, 3, 2)."""

    value: Array
    gradient: Array
