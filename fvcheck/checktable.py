"""What all tables of a check file share: how strict they are, kinds of values, words for errors.

This module needs pydantic from the start; import it inside functions only.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field, Strict

# TOML has lists only; inside them numbers stay strict.
Pair = Annotated[tuple[float, float], Strict(False)]
Names = Annotated[tuple[str, ...], Strict(False)]
Positive = Annotated[float, Field(gt=0)]
Percent = Annotated[float, Field(ge=0)]

NUMBER = "a number"
POSITIVE = "a number above zero"
PERCENT = "a percentage, zero or more"
TEXT = "a text"
VALUE = "a number or the name of an array"


class Table(BaseModel):
    """Base of all tables: no unknown keys, no conversions, no NaN or infinity, no later changes."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)
