"""Reading a check file (TOML 1.0), with errors that name the key."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Collection, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, get_args

from fvcheck.errors import SetupError, nearest

if TYPE_CHECKING:
    from pydantic import BaseModel, ValidationError

    from fvcheck.checkmodel import CheckFile

MAX_BYTES = 10_000_000


def load(path: str | Path, *, laws: Collection[str] = ()) -> CheckFile:
    """The check file at ``path``.

    ``laws`` are the known names of laws; where given, other names are errors.
    SetupError, on one line, for a missing file, broken TOML (with line and
    column), an unknown key (with the nearest known one), or a value of the
    wrong kind (with what is expected).
    """
    path = Path(path)
    data = _read(path)
    from pydantic import ValidationError

    from fvcheck.checkmodel import CheckFile

    try:
        check = CheckFile.model_validate(data)
    except ValidationError as error:
        raise _explained(error, path) from None
    check._path = path
    _check_laws(check, laws)
    return check


def _read(path: Path) -> dict[str, Any]:
    try:
        if not path.is_file():
            raise SetupError("There is no such check file", where=path)
        if path.stat().st_size > MAX_BYTES:
            raise SetupError("The file is too large for a check file", where=path)
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except tomllib.TOMLDecodeError as error:
        found = re.fullmatch(r"(.*) \(at (.*)\)", str(error), re.DOTALL)
        what, place = found.groups() if found else (str(error), "")
        raise SetupError(
            f"The TOML text is broken: {what}", where=f"{path}, {place}" if place else path
        ) from None
    except UnicodeDecodeError:
        raise SetupError("The check file is no UTF-8 text", where=path) from None
    except RecursionError:
        raise SetupError("The check file is nested too deeply", where=path) from None
    except (OSError, ValueError) as error:
        raise SetupError(f"The check file cannot be read: {error}", where=path) from None


def _check_laws(check: CheckFile, laws: Collection[str]) -> None:
    if not laws:
        return
    named = [("[case] laws", law) for law in check.case.laws or ()]
    named += [("[tolerance]", law) for law in check.tolerance]
    named += [(f"[[source]] {number}", source.law) for number, source in enumerate(check.source, start=1)]
    named += [(f"[[expect]] {n}", expect.law) for n, expect in enumerate(check.expect, start=1) if expect.law]
    for place, law in named:
        if law not in laws and not law.startswith("scalar:"):
            raise SetupError(
                f"There is no law {law!r}",
                where=f"{check.path}, {place}",
                mend=nearest(law, laws) or f"Known: {', '.join(sorted(laws))}.",
            )


def _explained(error: ValidationError, path: Path) -> SetupError:
    """The first of the validator's findings, in our words.

    The others often follow from it: a union reports once per member, and a
    misspelled key is missing under its right name, so unknown keys go first.
    """
    findings = error.errors(include_url=False)
    first = next((found for found in findings if found["type"] == "extra_forbidden"), findings[0])
    model, keys, expected = _locate(first["loc"])
    place = f"{path}, {_spelled(keys)}" if keys else str(path)
    match first["type"]:
        case "extra_forbidden":
            known = list(model.model_fields)
            mend = f"{nearest(keys[-1], known)} Known here: {', '.join(known)}."
            return SetupError(f"Unknown key {keys[-1]!r}", where=place, mend=mend)
        case "missing":
            return SetupError(f"The key {keys[-1]!r} is missing", where=place, mend=f"It takes {expected}.")
        case "value_error":
            text = str(first["ctx"]["error"])
            return SetupError(text[:1].upper() + text[1:], where=place)
        case _:
            value = repr(first["input"])
            shown = value if len(value) <= 60 else value[:59] + "…"
            what = f"{keys[-1]!r} takes {expected}" if keys else "The check file is no table"
            return SetupError(f"{what}, not {shown}", where=place)


def _locate(loc: Sequence[str | int]) -> tuple[type[BaseModel], list[Any], str]:
    """Innermost table, keys and expected value for a place that pydantic names.

    Its places also hold the members of unions and tuples it tried, which no
    user wrote; they come after the last key that a table knows and are dropped.
    """
    from fvcheck.checkmodel import CheckFile

    model: type[BaseModel] = CheckFile
    keys: list[Any] = []
    expected = "a table"
    rest = list(loc)
    while rest:
        step = rest.pop(0)
        keys.append(step)
        info = model.model_fields.get(str(step))
        if info is None:
            break
        expected = info.description or expected
        inner = _table_in(info.annotation)
        if rest and _is_mapping(info.annotation):
            keys.append(rest.pop(0))
            if inner is None or rest[:1] != [inner.__name__]:
                break
            model = inner
            rest.pop(0)
        elif inner is not None:
            model = inner
            if rest and isinstance(rest[0], int):
                keys.append(rest.pop(0))
        else:
            break
    return model, keys, expected


def _table_in(annotation: Any) -> type[BaseModel] | None:
    """The table that a key holds, alone, optional or as a list."""
    from pydantic import BaseModel

    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    found = (_table_in(argument) for argument in get_args(annotation))
    return next((table for table in found if table is not None), None)


def _is_mapping(annotation: Any) -> bool:
    return getattr(annotation, "__origin__", None) is dict


def _spelled(keys: Sequence[Any]) -> str:
    """``[[surface]] 2, shape`` or ``[case] plane``: as the file has it, tables counted from 1."""
    if len(keys) > 1 and isinstance(keys[1], int):
        head, rest = f"[[{keys[0]}]] {keys[1] + 1}", keys[2:]
    else:
        head, rest = f"[{keys[0]}]" if len(keys) > 1 else str(keys[0]), keys[1:]
    return " ".join([head, ".".join(map(str, rest))]).strip()
