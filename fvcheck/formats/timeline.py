"""One list of steps for a file whose arrays each keep steps of their own."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from fvcheck.errors import FormatError
from fvcheck.hints import Hint

Key = tuple[int, ...]


@dataclass(frozen=True)
class Timeline:
    """The steps of a file: ``keys`` in order, their ``times`` (empty for a single state without one)."""

    keys: tuple[Key, ...]
    times: tuple[float, ...]
    hints: tuple[Hint, ...] = ()

    def stored(self, own: Mapping[Key, object], step: int) -> Key:
        """The key under which an array with the keys ``own`` keeps its values for ``step``."""
        key = self.keys[step]
        return key if key in own else next(iter(own))


def times_of(values: tuple[float, ...], where: object) -> tuple[float, ...]:
    """The times of an export: finite, and none for a single state at time 0.

    Time 0 is what writers put down for a state that has no time.
    """
    for step, time in enumerate(values):
        if not math.isfinite(time):
            raise FormatError(f"the time of step {step} is no finite number", where=where)
    return () if values == (0.0,) else values


def timeline(stored: Mapping[str, Mapping[Key, float]], where: object) -> Timeline:
    """Steps of a file from those of its arrays (name -> key of step -> time).

    An array with one step among arrays with several holds at all of them (with
    a hint). Any other difference is an error, since values of different times
    would meet in one balance: raises `FormatError`.
    """
    clock: dict[Key, float] = {}
    for name, own in stored.items():
        for key, time in own.items():
            if clock.setdefault(key, time) != time and not (math.isnan(time) and math.isnan(clock[key])):
                raise FormatError(f"array '{name}' has another time at step {_text(key)}", where=where)
    several = {name: own for name, own in stored.items() if len(own) > 1}
    keys = tuple(sorted({key for own in (several or stored).values() for key in own}))
    if not several and len({clock[key] for key in keys}) > 1:
        raise FormatError(
            "the arrays are stored at different times", where=where, mend="Export all arrays at each time."
        )
    if not several:
        keys = keys[:1]
    for name, own in several.items():
        if len(own) < len(keys):
            lost = next(key for key in keys if key not in own)
            raise FormatError(
                f"array '{name}' is missing at step {_text(lost)}",
                where=where,
                mend="Export all arrays at each step.",
            )
    held = [name for name, own in stored.items() if len(own) == 1] if several else []
    hints = tuple(
        Hint("one-step-array", f"array '{name}' is stored at one step only; it is taken as constant in time")
        for name in held
    )
    return Timeline(keys or ((0,),), times_of(tuple(clock[key] for key in keys), where), hints)


def _text(key: Key) -> str:
    return ", ".join(str(number) for number in key)
