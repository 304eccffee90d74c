"""A check file to begin from: what an export holds, as TOML with comments, which runs as written."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import fields
from pathlib import Path
from typing import Any

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.fieldnames import ROLES
from fvcheck.fluid import Fluid
from fvcheck.inspection import Inspection, inspect_file
from fvcheck.walls import Spin
from fvcheck.wholefile import write_whole


def write_start(
    file: str | Path,
    check: str | Path,
    *,
    force: bool = False,
    step: int | str = "last",
    found: Inspection | None = None,
    **reading: Any,
) -> str:
    """Write a check file for an export; its text.

    force : write over a file that is there
    found : what `inspect_file` said, where that is known already
    reading : as of `inspect_file`; what is told here stands in the check file

    Raises SetupError where the file is there already or cannot be written, and what `inspect_file` does.
    """
    check = Path(check)
    if check.exists() and not force:
        raise SetupError("the check file is there already", where=check, mend="Add --force to write over it.")
    if check.is_dir() or not check.parent.is_dir():
        raise SetupError("there is no place for the check file", where=check, mend="Give the path of a file.")
    found = found or inspect_file(file, step=step, **reading)
    text = start_text(found, _relative(Path(file), check.parent), step, reading)
    write_whole(check, text.encode("utf-8"), "check file")
    return text


def start_text(
    found: Inspection, file: str, step: int | str = "last", reading: Mapping[str, Any] | None = None
) -> str:
    """The TOML text; ``file`` is the export as seen from the check file's folder."""
    reading = dict(reading or {})
    fluid = reading.get("fluid") or Fluid()
    parts = [
        [f"# A start for checking {_comment(file)}; see fvcheck explain gate.", *_bounds(found)],
        _case(found, file, step, reading),
        _fluid(found, fluid),
        _fields(found, reading.get("fields") or {}),
        _patches(found, reading.get("walls") or {}),
        _surfaces(found, reading),
        _bodies(found),
        _limits(),
    ]
    return "\n\n".join("\n".join(part) for part in parts) + "\n"


def _relative(file: Path, folder: Path) -> str:
    try:
        return Path(os.path.relpath(file.resolve(), folder.resolve())).as_posix()
    except ValueError:  # another drive
        return str(file.resolve())


def _bounds(found: Inspection) -> list[str]:
    x0, y0, x1, y1 = found.bounds
    return [
        f"# {found.cells} cells, x from {x0:.6g} to {x1:.6g}, y from {y0:.6g} to {y1:.6g}; "
        "SI or any consistent units."
    ]


def _case(found: Inspection, file: str, step: int | str, reading: Mapping[str, Any]) -> list[str]:
    out = ["[case]", f"file = {_toml(file)}"]
    if found.steps > 1:
        out.append(f'step = {_toml(step)}               # of {found.steps}; "all" for each of them')
    out.append(
        f"plane = {_toml(reading.get('plane') or 'auto')}              # found: {_comment(found.plane)}"
    )
    values = _toml(reading.get("cell_values") or "average")
    out.append(f'cell_values = {values}     # what a cell value is, or "centroid"')
    if reading.get("symmetry", "planar") != "planar":
        out += [f"symmetry = {_toml(reading['symmetry'])}", f"axis = {_toml(reading.get('axis') or 'auto')}"]
    if reading.get("depth") is not None:
        out.append(f"depth = {_toml(reading['depth'])}")
    else:
        out.append("# depth = 1.0                # metres; results are per metre without it")
    out.append('# laws = ["mass", "momentum"]  # left out: those that the data allow')
    return out


def _fluid(found: Inspection, fluid: Fluid) -> list[str]:
    plain = Fluid()
    told = {
        item.name: getattr(fluid, item.name)
        for item in fields(fluid)
        if getattr(fluid, item.name) != getattr(plain, item.name)
    }
    out = ["[fluid]"]
    roles = {facts.row.role for facts in found.arrays}
    if "density" not in told and not {"density", "density?"} & roles and not fluid.ideal_gas:
        out.append("density = 1.0                # PLEASE SET: the file has none")
    for name, value in told.items():
        if isinstance(value, Mapping):
            value = {str(key): one for key, one in value.items()}
        out.append(f"{name} = {_toml(value)}")
    hints = {
        "viscosity": "# viscosity = 1.8e-5         # dynamic; PLEASE SET, without it there is no friction",
        "pressure_kind": '# pressure_kind = "static"   # or "kinematic" (p/rho), "reduced" (no weight)',
        "specific_heat": "# specific_heat = 1005.0     # with conductivity, for the heat law",
        "conductivity": "# conductivity = 0.026",
        "gravity": "# gravity = [0.0, -9.81]",
        "gamma": "# gamma = 1.4                # with gas_constant = 287.0, for an ideal gas",
    }
    return out + [line for name, line in hints.items() if name not in told]


def _fields(found: Inspection, told: Mapping[str, Any]) -> list[str]:
    out = ["[fields]                     # role = array; others are recognised by their names"]
    for role, names in told.items():
        out.append(f"{_key(role)} = {_toml(names if isinstance(names, str) else list(names))}")
    claims: dict[str, list[tuple[str, str]]] = {}
    for facts in found.arrays:
        claims.setdefault(facts.row.role, []).append((facts.row.location, facts.row.name))
    for role in ROLES:
        if role in told:
            continue
        sure, unsure = claims.get(role, []), claims.get(f"{role}?", [])
        for location, name in sure:
            out.append(f"# {role}: {_comment(name)}, at {location}s")
        if sure or not unsure:
            continue
        named = ", ".join(f"{name} (at {location}s)" for location, name in unsure)
        first = f"{unsure[0][0]}:{unsure[0][1]}"
        if len(unsure) > 1:
            out.append(f"{role} = {_toml(first)}   # PLEASE CHECK: one of {_comment(named)}")
        else:
            out.append(f"# {role} = {_toml(first)}   # could be {_comment(named)}")
    others = [name for _, name in (*claims.get("-", ()),)]
    if others:
        out.append(f"# without a role: {_comment(', '.join(dict.fromkeys(others)))}")
    return out


def _patches(found: Inspection, walls: Any) -> list[str]:
    told = dict(walls) if isinstance(walls, Mapping) else dict.fromkeys(walls, (0.0, 0.0))
    out = ["[patches]"]
    for patch in found.patches:
        facts = [f"{patch.length:.4g} long"]
        facts += [f"{patch.through:.4g} through it"] if patch.through is not None else []
        facts += ["a body"] if patch.body else []
        out.append(f"# {_comment(patch.name)}: {', '.join(facts)}")
    still = [p.name for p in found.patches if p.stillness is not None and p.stillness < 0.05]
    resting = [name for name, motion in told.items() if motion == (0.0, 0.0)]
    if resting:
        out.append(f"wall = {_toml(resting)}")
    else:
        more = "the flow is at rest there" if still else "no-slip patches"
        out.append(f"# wall = {_toml(still or [p.name for p in found.patches[:1]])}   # {more}")
    moving = {name: _motion(motion) for name, motion in told.items() if motion != (0.0, 0.0)}
    if moving:
        out.append(f"moving_wall = {_toml(moving)}")
    return out


def _motion(motion: Any) -> Any:
    if isinstance(motion, Spin):
        return {"omega": motion.omega, "centre": [motion.x, motion.y]}
    return motion if isinstance(motion, Mapping) else list(motion)


def _surfaces(found: Inspection, reading: Mapping[str, Any]) -> list[str]:
    out = ["[[surface]]", 'name = "domain"', 'shape = "domain()"            # the whole of it']
    for body, gap in _gaps(found, reading):
        out += ["", "[[surface]]", f"name = {_toml(f'around-{body}')}"]
        out.append(f"shape = {_toml(f'around({body}, {gap:.3g})')}   # halfway to what is next to it")
    x0, y0, x1, y1 = found.bounds
    box = [x0 + 0.25 * (x1 - x0), y0 + 0.25 * (y1 - y0), x0 + 0.75 * (x1 - x0), y0 + 0.75 * (y1 - y0)]
    spelled = f"box({', '.join(f'{value:.4g}' for value in box)})"
    return [
        *out,
        "",
        "# [[surface]]                # a volume of your own, some cells away from walls",
        '# name = "middle"',
        f"# shape = {_toml(spelled)}",
    ]


def _gaps(found: Inspection, reading: Mapping[str, Any]) -> Iterator[tuple[str, float]]:
    """Bodies that a surface can be spelled around, with its distance."""
    if not found.bodies:
        return
    from fvcheck.flow import open_flow
    from fvcheck.mesh.boundary import clearance
    from fvcheck.surfaces import ControlSurface

    settings = {key: value for key, value in reading.items() if key in ("plane", "symmetry", "axis")}
    try:
        mesh = open_flow(found.file, step=found.step, **settings).mesh
    except FvcheckError:
        return  # fields that are not clear; the domain is enough to begin with
    for body in found.bodies:
        gap = float(f"{0.5 * clearance(mesh, body):.3g}")
        try:
            parsed = ControlSurface.parse(f"around({body}, {gap:.3g})").resolve(mesh)
        except FvcheckError:
            continue  # a name that has no such spelling
        if parsed.kind == "around":
            yield body, gap


def _bodies(found: Inspection) -> list[str]:
    roles = {facts.row.role for facts in found.arrays}
    ready = any(role.startswith(("velocity", "momentum")) for role in roles) and "pressure" in roles
    body = found.bodies[0] if found.bodies else (found.patches[0].name if found.patches else "pier")
    live = "" if ready and found.bodies else "# "
    out = []
    for name in found.bodies if live == "" else (body,):
        out += [f"{live}[[body]]                     # its forces", f"{live}name = {_toml(name)}"]
        out.append("# reference = { velocity = 1.0, length = 0.1, density = 1.0 }   # for coefficients")
    return out


def _limits() -> list[str]:
    return [
        "[tolerance]                  # percent of the law's scale",
        "mass = 0.5",
        "momentum = 1.0",
        "",
        "# [[expect]]                 # for fvcheck gate; on a surface's law, or on a body",
        '# surface = "domain"',
        '# law = "mass"',
        "# imbalance_percent = { max = 0.5 }   # in size",
        "",
        "# [baseline]                 # fvcheck gate --update-baseline writes it",
        '# file = "baseline.json"',
        "# tolerance_percent = 0.5",
    ]


def _toml(value: Any) -> str:
    """A value in TOML: texts, numbers, lists and inline tables."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{_key(str(key))} = {_toml(one)}" for key, one in value.items()) + " }"
    if isinstance(value, Sequence):
        return "[" + ", ".join(_toml(one) for one in value) + "]"
    return repr(float(value)) if isinstance(value, float) else str(value)


def _key(name: str) -> str:
    plain = name.replace("_", "").replace("-", "")
    return name if plain.isascii() and plain.isalnum() else _toml(name)


def _comment(text: str) -> str:
    """One line, whatever a file's names hold."""
    return "".join(letter if letter.isprintable() else "?" for letter in " ".join(text.split()))
