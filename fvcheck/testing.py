"""For test suites (a pytest plugin): ledgers and check files in two lines.

    def test_the_run_conserves(fvcheck_ledger):
        fvcheck_ledger("run.vtu", "box(0, 0, 1, 1)", fluid=FLUID).assert_closed("mass")

    @pytest.mark.fvcheck("check.toml")
    def test_the_check_file(fvcheck_gate):
        fvcheck_gate.assert_passed()

Paths are relative to the file of the test. Nothing of fvcheck is loaded before
a test asks for it. Needs pytest, which imports this module by its entry point.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from fvcheck.gating import GateResult
    from fvcheck.ledger import Ledger, Row

__all__ = ["Checked", "CheckedGate", "fvcheck_gate", "fvcheck_ledger"]


class Checked:
    """A ledger with assertions; everything else of it is at hand as ``ledger``."""

    def __init__(self, ledger: Ledger) -> None:
        self.ledger = ledger

    def __getitem__(self, key: str | tuple[str, str]) -> Row:
        """As of `fvcheck.Ledger`."""
        return self.ledger[key]

    def assert_verdict(self, verdict: str, *laws: str) -> None:
        """Fail unless every row of these laws (default: all) has this verdict."""
        __tracebackhide__ = True
        self._fail([row for row in self._rows(laws) if row.verdict != verdict], f"not {verdict}")

    def assert_closed(self, *laws: str) -> None:
        """Fail unless every row of these laws (default: all) is closed."""
        __tracebackhide__ = True
        self.assert_verdict("closed", *laws)

    def assert_within(self, percent: float, *laws: str) -> None:
        """Fail unless every imbalance of these laws is at most so many percent of its scale."""
        __tracebackhide__ = True
        rows = self._rows(laws)
        beyond = [
            row for row in rows if row.imbalance_percent is None or not abs(row.imbalance_percent) <= percent
        ]
        self._fail(beyond, f"not within {percent:g} %")

    def _rows(self, laws: tuple[str, ...]) -> list[Row]:
        rows = list(self.ledger.rows)
        out: list[Row] = []
        for law in laws:
            of_law = [row for row in rows if law in (row.law, row.label)]
            out += of_law or [self.ledger[law]]  # the latter says what rows there are
        out = out if laws else rows
        if not out:
            pytest.fail(f"the ledger of {self.ledger.name!r} has no rows", pytrace=False)
        return out

    def _fail(self, rows: list[Row], what: str) -> None:
        __tracebackhide__ = True
        if rows:
            lines = [f"ledger of {self.ledger.name!r}: {len(rows)} of {len(self.ledger.rows)} rows {what}"]
            pytest.fail("\n".join([*lines, *map(_line, rows)]), pytrace=False)


def _line(row: Row) -> str:
    def percent(value: float | None) -> str:
        return "none" if value is None else f"{value:.3g} %"

    data, mesh = (percent(row.percent(band)) for band in (row.sampling_band, row.resolution_band))
    return (
        f"  {row.label}: imbalance {percent(row.imbalance_percent)}, ±data {data}, ±mesh {mesh}, "
        f"tolerance {percent(row.tolerance_percent)}, verdict {row.verdict or 'none'}"
    )


class CheckedGate:
    """What a gate found, with an assertion; everything of it is at hand as ``result``."""

    def __init__(self, result: GateResult) -> None:
        self.result = result

    def assert_passed(self) -> None:
        """Fail unless all that the check files ask for is met; the message lists what is not."""
        __tracebackhide__ = True
        if self.result.passed:
            return
        lines = [f"gate: exit status {self.result.status}"]
        lines += [f"  {check}: {finding.name}: {finding.message}" for check, finding in self.result.failures]
        words = [line for outcome in self.result.outcomes for line in outcome.diagnosis.splitlines()]
        pytest.fail("\n".join([*lines, *(f"  {line}" for line in words)]), pytrace=False)


@pytest.fixture
def fvcheck_ledger(request: pytest.FixtureRequest) -> Callable[..., Checked]:
    """``fvcheck_ledger(export, surface=None, laws=None, *, tolerance=…, **reading)`` -> `Checked`.

    export : a path, or a `fvcheck.Flow`
    surface : its spelling or a `fvcheck.ControlSurface`; default the whole domain
    tolerance, scale, sources, about : as of `fvcheck.balance`
    reading : as of `fvcheck.open_flow`
    """
    folder = request.path.parent

    def ledger(export: Any, surface: Any = None, laws: Any = None, **settings: Any) -> Checked:
        import fvcheck

        judged = {
            key: settings.pop(key) for key in ("tolerance", "scale", "sources", "about") if key in settings
        }
        if isinstance(export, str | Path):
            export = fvcheck.open_flow(folder / export, **settings)
        elif settings:
            pytest.fail(f"a flow is read already; it takes no {', '.join(settings)}", pytrace=False)
        if surface is None:
            surface = fvcheck.ControlSurface.domain(name="domain")
        elif isinstance(surface, str):
            surface = fvcheck.ControlSurface.parse(surface, base=folder)
        laws = [laws] if isinstance(laws, str) else laws
        return Checked(fvcheck.balance(export, surface, laws, **judged))

    return ledger


@pytest.fixture
def fvcheck_gate(request: pytest.FixtureRequest) -> CheckedGate:
    """What the check files of the marker ``fvcheck`` came to."""
    named = [name for marker in request.node.iter_markers("fvcheck") for name in marker.args]
    if not named:
        pytest.fail('fvcheck_gate needs @pytest.mark.fvcheck("CHECK.toml", …)', pytrace=False)
    return _gated(request.path.parent, named)


def _gated(folder: Path, named: list[Any]) -> CheckedGate:
    from fvcheck.gating import gate

    return CheckedGate(gate([folder / name for name in named], workers=0))


def pytest_configure(config: pytest.Config) -> None:
    """Make the marker known."""
    config.addinivalue_line(
        "markers", "fvcheck(check, ...): check files that must pass before the test runs, see fvcheck.testing"
    )


@pytest.hookimpl(wrapper=True)
def pytest_runtest_call(item: pytest.Item) -> Iterator[None]:
    """A marked test that does not look at the gate itself passes only if its check files do."""
    named = [name for marker in item.iter_markers("fvcheck") for name in marker.args]
    if named and "fvcheck_gate" not in getattr(item, "fixturenames", ()):
        _gated(item.path.parent, named).assert_passed()
    return (yield)
