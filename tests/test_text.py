"""Tables fit 80 columns, keep their numbers, and need no colour."""

import json
import math
import re
from pathlib import Path

import pytest
from forked import fvcheck

from fvcheck.hints import Hint
from fvcheck.inspection import inspect_file
from fvcheck.ledger import Ledger, Port, Result, Row
from fvcheck.text import numbers
from fvcheck.text.inspection import inspection_text
from fvcheck.text.ledger import result_text, steps_text

ROOT = Path(__file__).parent.parent
SAMPLE_FILES = json.loads((ROOT / "tests" / "samples" / "samples.json").read_text())["files"]


def row(law="kinetic-energy", component=None, factor=1.0, storage=0.0, verdict="open", **more):
    given = {
        "law": law,
        "component": component,
        "unit": "kg/s/m",
        "parts": {"convective": -1.2345678e-3 * factor, "pressure": 3.3e-4 * factor},
        "inflow": 9.8765432e-3 * factor,
        "outflow": 8.7654321e-3 * factor,
        "flux": -1.1111111e-3 * factor,
        "boundary": -7.7777777e-3 * factor,
        "patches": {"a patch with quite a long name": -7.7777777e-3 * factor},
        "storage": storage,
        "source": -2.2222222e-3 * factor,
        "imbalance": -6.6666666e-4 * factor,
        "scale": 9.1111111e-3 * factor,
        "imbalance_percent": -7.317073,
        "sampling_band": 1.2345e-5 * factor,
        "resolution_band": 4.5678e-5 * factor,
        "rounding_band": 0.0,
        "linear_imbalance": 1e-3 * factor,
        "tolerance_percent": 0.5,
        "verdict": verdict,
    }
    return Row(**(given | more))


def result(*rows, **more):
    port = Port("outlet", None, 0.123456, 1.23456e-3, 12.3456, 101325.678, 293.15, 1.0123, 1.0456)
    ledger = {"name": "a name of some length", "kind": "polygon", "closed": True, "length": 1.2345678}
    ledger["area"] = 0.98765432
    ledger |= {"rows": rows, "ports": (port, port), "degrees": {"3": 1.0}}
    case = {"file": "some/folder/run.vtu", "cells": 123456, "location": "cell", "time": 1.5, "step": 3}
    hints = (Hint("law-left-out", "heat: no specific heat. Give --specific-heat. " * 4),)
    return Result(case, (Ledger(**(ledger | more)),), hints)


HARD = [
    row(),
    row("momentum", "x", 1e-9, verdict="mesh-limited"),
    row("angular-moment", "z", -1e12, verdict="undecided"),
    row("heat", verdict="closed", imbalance=0.0, imbalance_percent=None, scale=0.0),
    row("mass", imbalance_percent=1.23456e7, sampling_band=1e9, verdict="open"),
]


@pytest.mark.parametrize("storage", [0.0, 1.2345e-3])
@pytest.mark.parametrize("closed", [True, False])
def test_no_line_is_wider_than_80_columns(storage, closed, monkeypatch):
    monkeypatch.delenv("COLUMNS", raising=False)
    rows = [*HARD, row(storage=storage)]
    text = result_text(result(*rows, closed=closed), patches=True)
    assert max(map(len, text.splitlines())) <= 80, text
    assert "…" not in text, "nothing is cut off"


def test_what_the_row_holds_can_be_read():
    text = result_text(result(row(), row("mass", storage=5e-3)))
    assert (
        "9.8765" in text and "8.7654" in text and "-7.7778" in text and "-2.2222" in text and "9.1111" in text
    )
    assert "-0.6667" in text and "-7.32" in text and "5.0000" in text
    assert text.count("10⁻³ kg/s/m") == 2


def test_storage_is_shown_only_where_there_is_some():
    assert "storage" not in result_text(result(row()))
    assert "storage" in result_text(result(row(storage=1e-3)))


def test_patches_are_split_when_asked_for():
    assert "a patch with quite a long name" not in result_text(result(row()))
    assert "a patch with quite a long name" in result_text(result(row()), patches=True)


@pytest.mark.parametrize(
    ("verdict", "mark"), [("closed", "✓"), ("undecided", "?"), ("mesh-limited", "△"), ("open", "✗")]
)
def test_a_verdict_is_told_by_mark_and_word(verdict, mark):
    text = result_text(result(row(verdict=verdict)))
    assert len(re.findall(rf"{re.escape(mark)} {verdict}\b", text)) == 2  # in its row, and last


def test_the_verdict_comes_last_with_what_to_do():
    lines = result_text(result(row())).splitlines()
    at = next(number for number, line in enumerate(lines) if line.startswith("verdict "))
    rest = "\n".join(lines[at:])
    assert "worst  kinetic-energy of a name of some length: -7.32 % against 0.5 %" in rest
    assert "do     Iterate further" in rest
    assert any(line.startswith("hint law-left-out: ") for line in lines[:at])


def test_open_surfaces_have_fluxes_and_no_verdict():
    text = result_text(result(row(verdict=None, imbalance=None, imbalance_percent=None), closed=False))
    assert "no verdict" in text and "imbalance" not in text


def test_steps_end_with_a_table_of_all():
    text = steps_text([result(row(verdict="closed"), name="a"), result(row(), name="a")])
    assert max(map(len, text.splitlines())) <= 80
    assert [line.split()[-1] for line in text.splitlines()[-2:]] == ["closed", "open"]


def test_a_name_with_brackets_is_no_markup():
    assert "[bold]x[/bold]" in result_text(result(row(), name="[bold]x[/bold]"))


def test_a_fallen_degree_is_told():
    assert "degree 3 on" not in result_text(result(row()))
    assert "degree 3 on 90 %" in result_text(result(row(), degrees={"1": 0.1, "3": 0.9}))


def test_names_cannot_steer_a_terminal():
    text = result_text(result(row(patches={"a\x1b]0;title\x07b": 1.0}), name="x\x1b[2Jy"), patches=True)
    assert "\x1b" not in text and "\x07" not in text and "a?]0;title" in text


@pytest.mark.parametrize("name", sorted(SAMPLE_FILES))
def test_an_inspection_of_any_sample_fits_80_columns(name):
    found = inspect_file(ROOT / "tests" / "samples" / name)
    text = inspection_text(found)
    assert max(map(len, text.splitlines())) <= 80, text
    assert f"{SAMPLE_FILES[name]['cells']} cells" in text
    assert all(patch.name in text for patch in found.patches)
    assert all(facts.row.name in text for facts in found.arrays), text


def test_a_pipe_gets_no_colour():
    shown = fvcheck("explain", "bands")
    assert "\x1b" not in shown.out


@pytest.mark.parametrize("environment", [{"NO_COLOR": "1", "FORCE_COLOR": ""}, {"TERM": "dumb"}])
def test_colour_can_be_switched_off(environment):
    shown = fvcheck(
        "balance", "meshes/demo-coarse.vtu", "--density", "1.2", "--law", "mass", environment=environment
    )
    assert shown.status != 2 and "\x1b" not in shown.out


def test_ascii_marks_stand_in_where_the_output_has_no_others(monkeypatch):
    from fvcheck.text import console, ledger

    monkeypatch.setattr(console, "rich_characters", lambda: False)
    monkeypatch.setattr(ledger, "rich_characters", lambda: False)
    text = result_text(result(row(), name="plain"))
    assert text.isascii() and "! open" in text and "1e-3 kg/s/m" in text


@pytest.mark.parametrize("value", [0.0, 1.0, -123456.789, 1e-300, -9.99999e22, 0.09999951])
def test_short_numbers_are_right_to_their_digits(value):
    assert float(numbers.short(value)) == pytest.approx(value, rel=5e-3)  # three digits at least
    assert len(numbers.short(value)) <= 10


@pytest.mark.parametrize("value", [0.0, 1e-12, 0.05, 0.9996, 9.996, 99.96, 999.6, 1e5, -3e9])
def test_percentages_are_right_to_their_digits(value):
    assert float(numbers.percent(value)) == pytest.approx(value, rel=0.06)  # two digits where an exponent is
    assert len(numbers.percent(value)) <= 8


@pytest.mark.parametrize("size", [1e-7, 9.99999e-4, 1e-3, 0.5, 999.9999, 1e3, 1.5e9])
def test_numbers_of_a_row_share_a_power_of_1000(size):
    power = numbers.exponent([size, -size / 7, None, math.nan])
    places = numbers.decimals([size], power)
    shown = [numbers.scaled(value, power, places) for value in (size, size * 1e-4, -size * 1e-8)]
    for text, value in zip(shown, (size, size * 1e-4, -size * 1e-8)):
        assert float(text) * 10.0**power == pytest.approx(value, rel=0.05)  # two digits of the smallest
        assert len(text) <= 9
    assert float(shown[0]) < 1000.5 and power % 3 == 0


def test_the_gauge_shows_where_the_imbalance_lies():
    shown = {value: numbers.gauge(value, 0.1, 1.0, rich=False) for value in (-9.0, -1.5, 0.0, 0.5, 9.0)}
    assert shown == {
        -9.0: "<..[..|..]...",
        -1.5: ".-o[..|..]...",
        0.0: "...[..o..]...",
        0.5: "...[..|-o]...",
        9.0: "...[..|..]..>",
    }


def test_json_of_a_result_is_strict():
    from fvcheck.jsonout import dumps

    text = dumps(result(row(imbalance=math.nan, scale=math.inf)).to_dict())
    assert json.loads(text)["surfaces"][0]["laws"][0]["imbalance"] is None
    assert "NaN" not in text and "Infinity" not in text
