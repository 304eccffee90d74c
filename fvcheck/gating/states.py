"""The states of a check file's case, each balanced for all laws that are asked for or expected."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.verdict import worst

if TYPE_CHECKING:
    from fvcheck.checkmodel import CheckFile
    from fvcheck.flow import Flow
    from fvcheck.settings import Settings


def states_of(
    check: CheckFile, files: list[Path], settings: Settings
) -> Iterator[tuple[dict[str, Any], Flow]]:
    """(result as a dictionary, flow) of each state: one, or with storage those of a series.

    A law that is only expected, on request that is, has rows on the surfaces it is expected on.
    """
    from fvcheck.flow import stored_flow
    from fvcheck.formats.registry import open_export

    if len(files) == 1 and settings.step != "all":
        flow = stored_flow(open_export(files[0]), step=settings.step, **settings.reading)
        yield _one_state(check, settings, flow), flow
        return
    if settings.step not in ("last", "all"):
        raise SetupError(
            "a step is told for several files", where=check.path, mend='Leave it out, or write "all".'
        )
    yield from _series(check, files, settings)


def _one_state(check: CheckFile, settings: Settings, flow: Flow) -> dict[str, Any]:
    from fvcheck.balancing import balance, balance_all, default_surfaces
    from fvcheck.ledger import ledger_dict

    judged = settings.judged
    data = balance_all(flow, settings.surfaces, settings.laws, **judged).to_dict()
    surfaces = {one.name: one for one in settings.surfaces or default_surfaces(flow)}
    for ledger in data["surfaces"]:
        have = {row["law"] for row in ledger["laws"]}
        for law in _expected(check, ledger["name"]):
            if law in have or ledger["name"] not in surfaces:
                continue
            try:
                more = balance(flow, surfaces[ledger["name"]], [law], **judged)
            except FvcheckError as error:
                data["hints"].append({"code": "law-left-out", "message": f"{law}: {error}"})
                continue
            ledger["laws"] += ledger_dict(more)["laws"]
            data["verdict"] = worst([data["verdict"], more.verdict])
    return data


def _series(check: CheckFile, files: list[Path], settings: Settings) -> Iterator[tuple[dict[str, Any], Flow]]:
    from fvcheck.balancing import choose_laws
    from fvcheck.series import open_series
    from fvcheck.timeseries import history

    series = open_series(files, **settings.reading)
    usual = [law.name for law in choose_laws(series.flow(0), settings.laws)]
    laws = list(dict.fromkeys([*usual, *_expected(check)]))
    found = history(series, settings.surfaces, laws, steady=settings.steady, **settings.judged)
    for place, entry in enumerate(found.entries):
        data = entry.result.to_dict()
        for ledger in data["surfaces"]:
            wanted = {*usual, *_expected(check, ledger["name"])}
            ledger["laws"] = [row for row in ledger["laws"] if row["law"] in wanted]
        data["verdict"] = worst(row["verdict"] for ledger in data["surfaces"] for row in ledger["laws"])
        yield data, series.flow(place)


def _expected(check: CheckFile, surface: str | None = None) -> list[str]:
    """Laws that something is expected of, on a surface or on any."""
    named = [e.law for e in check.expect if e.law is not None and surface in (None, e.surface)]
    return list(dict.fromkeys(named))
