"""A result against an earlier one: what has drifted beyond the tolerance and beyond the bands.

A change counts as drift only if it is larger than ``tolerance_percent`` (of the
row's scale, of the size of the force, of that force at its arm) and larger than
what the bands of both runs explain. On one mesh (same digest) both runs are sampled alike, so sampling
errors are common to both and drop out of the difference: what is left are the
rounding bands. On another mesh they do not, and the sampling bands of both runs
are added.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from fvcheck.errors import SetupError
from fvcheck.gating.expecting import estimate_label, row_label
from fvcheck.gating.outcome import MISSED, PASSED, UNUSABLE, Finding
from fvcheck.ledger import SCHEMA

Result = Mapping[str, Any]

MAX_BYTES = 200_000_000

ROW_NUMBERS = ("imbalance", "flux", "inflow", "outflow", "boundary", "storage", "source")
FORCE_NUMBERS = ("drag", "lift", "moment")

_SAME, _SAME_ON_OTHER_MESH = 1e-6, 1e-2
"""Relative difference in lengths and areas of surfaces: on other meshes curved walls have other chords."""

_FRAME = ("plane", "symmetry", "axis", "depth")


def read_baseline(path: Path) -> dict[str, Any]:
    """A result file; SetupError where it is missing or none."""
    try:
        if not path.is_file():
            raise SetupError("there is no baseline", where=path, mend="Write it with --update-baseline.")
        if path.stat().st_size > MAX_BYTES:
            raise SetupError("the file is too large for a result file", where=path)
        data = json.loads(path.read_text(encoding="utf-8"), parse_constant=_refuse, parse_float=_finite)
    except (OSError, ValueError, RecursionError) as error:
        raise SetupError(f"the baseline cannot be read: {error}", where=path) from None
    if not isinstance(data, dict) or data.get("schema") != SCHEMA:
        raise SetupError(
            f"the baseline is no result file ({SCHEMA})", where=path, mend="Write it with --update-baseline."
        )
    return data


def _refuse(word: str) -> float:
    raise ValueError(f"{word} is no number of a result file")


def _finite(word: str) -> float:
    # 1e999 is JSON, but no number of ours; an infinite scale would allow any drift.
    value = float(word)
    return value if math.isfinite(value) else _refuse(word)


def drifts(result: Result, baseline: Result, tolerance_percent: float) -> list[Finding]:
    """One finding per row and force, and one for whatever cannot be compared."""
    try:
        return list(_drifts(result, baseline, tolerance_percent / 100.0))
    except (KeyError, TypeError, AttributeError, ValueError) as error:
        text = f"the baseline lacks what a result file has ({type(error).__name__}: {error})"
        return [Finding("baseline", "baseline", UNUSABLE, text)]


def _drifts(result: Result, baseline: Result, share: float) -> Iterator[Finding]:
    for key in _FRAME:
        now, then = result["case"].get(key), baseline["case"].get(key)
        if now != then:
            yield _other("case", f"{key} is {now}, that of the baseline {then}")
            return
    digests = [one["case"].get("mesh_digest") for one in (result, baseline)]
    same_mesh = digests[0] is not None and digests[0] == digests[1]
    yield from _surfaces(result, baseline, share, same_mesh)
    yield from _forces(result, baseline, share, same_mesh)
    now, then = result.get("history") or (), baseline.get("history") or ()
    if len(now) != len(then):
        yield _other("history", f"there are {len(now)} states, in the baseline {len(then)}")
        return
    for number, (new, old) in enumerate(zip(now, then)):
        for finding in (*_surfaces(new, old, share, same_mesh), *_forces(new, old, share, same_mesh)):
            yield Finding(
                "baseline",
                f"state {number}, {finding.name.removeprefix('baseline: ')}",
                finding.status,
                finding.message,
                finding.value,
            )


def _surfaces(result: Result, baseline: Result, share: float, same_mesh: bool) -> Iterator[Finding]:
    now = {one["name"]: one for one in result["surfaces"]}
    then = {one["name"]: one for one in baseline["surfaces"]}
    yield from _only_one(now, then, "surface")
    for name in (name for name in now if name in then):
        new, old = now[name], then[name]
        what = _differs(new, old, _SAME if same_mesh else _SAME_ON_OTHER_MESH)
        if what:
            yield _other(name, f"the baseline is of another surface: {what}")
            continue
        rows, old_rows = ({row_label(row): row for row in one["laws"]} for one in (new, old))
        yield from _only_one(rows, old_rows, f"row of {name}")
        for label in (label for label in rows if label in old_rows):
            yield _row(f"{name}, {label}", rows[label], old_rows[label], share, same_mesh)


def _differs(new: Mapping[str, Any], old: Mapping[str, Any], allowed: float) -> str:
    if new["kind"] != old["kind"]:
        return f"a {new['kind']}, in the baseline a {old['kind']}"
    for key in ("length", "area"):
        a, b = new[key], old[key]
        if (a is None) != (b is None) or (a is not None and not math.isclose(a, b, rel_tol=allowed)):
            return f"its {key} is {_short(a)}, in the baseline {_short(b)}"
    return ""


def _row(name: str, new: Mapping[str, Any], old: Mapping[str, Any], share: float, same_mesh: bool) -> Finding:
    if new["unit"] != old["unit"]:
        return _other(name, f"the unit is {new['unit']}, in the baseline {old['unit']}")
    kind = "rounding_band" if same_mesh else "sampling_band"
    band = _number(new[kind]) + _number(old[kind])
    scale = old["scale"] or max((abs(old[key]) for key in ROW_NUMBERS if old.get(key)), default=0.0)
    return _compared(name, ROW_NUMBERS, new, old, share * scale, scale, lambda _: band)


def _forces(result: Result, baseline: Result, share: float, same_mesh: bool) -> Iterator[Finding]:
    now, then = (_numbered(one.get("forces") or ()) for one in (result, baseline))
    yield from _only_one(now, then, "force")
    for label in (label for label in now if label in then):
        new, old = now[label], then[label]
        size = math.hypot(_number(old["drag"]), _number(old["lift"]))
        # A moment may be a small difference of large parts; the force at its arm is what it is made of.
        moment = max(abs(_number(old["moment"])), size * _number(old.get("arm")))

        def band(number: str, new: Mapping[str, Any] = new, old: Mapping[str, Any] = old) -> float:
            if same_mesh:
                return 0.0  # sampled alike; the digits of the files are far below any tolerance
            return sum(_number(one.get("bands", {}).get(number, {}).get("sampling")) for one in (new, old))

        for numbers, scale in ((("drag", "lift"), size), (("moment",), moment)):
            tail = "" if numbers[0] == "drag" else " moment"
            yield _compared(
                f"{estimate_label(new)}{tail}",
                numbers,
                new,
                old,
                share * scale,
                scale,
                band,
            )


def _numbered(forces: Any) -> dict[tuple[str, str, int], Mapping[str, Any]]:
    """By body, route, and place among those of the route: distances follow the mesh."""
    out: dict[tuple[str, str, int], Mapping[str, Any]] = {}
    for e in forces:
        place = sum(key[:2] == (e["body"], e["method"]) for key in out)
        out[e["body"], e["method"], place] = e
    return out


def _compared(
    name: str,
    numbers: tuple[str, ...],
    new: Mapping[str, Any],
    old: Mapping[str, Any],
    allowed: float,
    scale: float,
    band: Any,
) -> Finding:
    worst, said = 0.0, "no drift"
    for number in numbers:
        a, b = new.get(number), old.get(number)
        if a is None and b is None:
            continue
        if a is None or b is None:
            gone = f"{number} is {_short(a)}, in the baseline {_short(b)}"
            return Finding("baseline", f"baseline: {name}", MISSED, gone)
        change = abs(float(a) - float(b))
        if not change <= max(allowed, band(number)):
            percent = f", {100 * change / scale:.3g} % of {_short(scale)}" if scale else ""
            text = f"{number} has drifted from {b:.6g} to {a:.6g}{percent}; tolerance {_short(allowed)}, "
            text += f"bands {_short(band(number))}"
            if said == "no drift" or change > worst:
                worst, said = change, text
    return Finding("baseline", f"baseline: {name}", PASSED if said == "no drift" else MISSED, said)


def _only_one(now: Mapping[Any, Any], then: Mapping[Any, Any], what: str) -> Iterator[Finding]:
    for key in now.keys() - then.keys():
        yield _other(_spelled(key), f"the baseline has no such {what}; --update-baseline writes it")
    for key in then.keys() - now.keys():
        yield _other(_spelled(key), f"the baseline has a {what} that this run lacks")


def _spelled(key: Any) -> str:
    return key if isinstance(key, str) else f"{key[0]} {key[1]} {key[2] + 1}"


def _other(name: str, text: str) -> Finding:
    return Finding("baseline", f"baseline: {name}", UNUSABLE, text)


def _number(value: Any) -> float:
    return 0.0 if value is None else float(value)


def _short(value: Any) -> str:
    return "none" if value is None else f"{value:.6g}"
