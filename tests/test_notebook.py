"""Results show as tables in a notebook, complete and with names as text."""

from dataclasses import replace
from pathlib import Path

import pytest
from pages import Page

import fvcheck
from fvcheck import ControlSurface

ROOT = Path(__file__).parent.parent
COARSE, FINE = (ROOT / "meshes" / f"demo-{kind}.vtu" for kind in ("coarse", "fine"))
SETTINGS = {"fluid": fvcheck.Fluid(density=1.2, viscosity=1.8e-5), "walls": ["patch-3", "patch-4"]}
BAR = fvcheck.ControlSurface.box(0.0115, 0.003, 0.0215, 0.012, name="<b>&bar")


@pytest.fixture(scope="module")
def flow():
    return fvcheck.open_flow(COARSE, **SETTINGS)


def shown(thing) -> Page:
    page = Page(thing._repr_html_())
    assert page.faults == []
    return page


def cells(page: Page) -> list[str]:
    return page.said("td")


def test_a_ledger_shows_all_of_every_row_and_its_name_as_text(flow):
    ledger = fvcheck.balance(flow, BAR, ["mass", "momentum"])
    page = shown(ledger)
    assert page.said("caption") == ["<b>&bar (box)"] and page.of("b") == []
    for row in ledger.rows:
        for value in (
            row.inflow,
            row.boundary,
            row.source,
            row.storage,
            row.imbalance,
            row.imbalance_percent,
        ):
            assert format(value, ".5g") in cells(page)
        assert format(100 * row.resolution_band / row.scale, ".5g") in cells(page)
        assert row.verdict in cells(page)


def test_a_result_shows_its_verdict_ledgers_and_hints(flow):
    result = fvcheck.balance_all(flow, [BAR], ["mass"])
    page = shown(result)
    assert f"verdict: {result.verdict}" in page.said("p")[-1]
    assert len(page.of("table")) == 1
    assert [text.partition(":")[0] for text in page.said("li")] == [hint.code for hint in result.hints] != []


def test_what_is_printed_at_a_prompt_is_a_line(flow):
    for thing in (flow, flow.mesh, ControlSurface.circle(0.5, 0.5, 0.2, name="a")):
        assert len(repr(thing)) < 300 and "\n" not in repr(thing)
    assert repr(ControlSurface.circle(0.5, 0.5, 0.2, name="a")) == "<ControlSurface a=circle(0.5, 0.5, 0.2)>"


def test_forces_show_every_route_with_bands(flow):
    found = fvcheck.forces(flow, "patch-4", distances=[0.002])
    page = shown(found)
    for estimate in found.estimates:
        for number in ("drag", "lift", "moment"):
            assert format(getattr(estimate, number), ".5g") in cells(page)
            assert format(estimate.band(number), ".5g") in cells(page)


def test_a_history_shows_its_trends_and_the_last_ledger():
    files = [ROOT / "meshes" / f"demo-coarse-0{n}.vtu" for n in ("100", "200", "400")]
    found = fvcheck.history(files, [BAR], ["mass"], steady=True, **SETTINGS)
    page = shown(found)
    assert "3 iterations" in page.said("b")
    assert format(found.trends[0].level, ".5g") in cells(page)
    assert format(found.entries[-1].result.ledgers[0]["mass"].imbalance, ".5g") in cells(page)


def test_a_study_shows_values_order_and_bands():
    found = fvcheck.study([COARSE, FINE], [BAR], ["mass", "momentum"], **SETTINGS)
    page = shown(found)
    assert "11688, 3054 cells" in page.said("p")[-1]
    for quantity in found.quantities:
        assert format(quantity.convergence.values[0], ".5g") in cells(page)
        assert format(quantity.convergence.band, ".5g") in cells(page)


def test_a_diagnosis_shows_what_it_says_and_where():
    early = fvcheck.open_flow(ROOT / "meshes" / "demo-coarse-0020.vtu", **SETTINGS)
    found = fvcheck.diagnose(early, ["momentum"])
    page = shown(found)
    assert found.sentence(found.why[0]) in " ".join(page.said("p"))
    for place in found.where:
        for region in place.regions:
            assert format(region.amount, ".5g") in cells(page)


def test_a_flow_shows_fields_and_patches_and_an_inspection_arrays_and_patches(flow):
    page = shown(flow)
    assert {"velocity", "U", "pressure", "p", "patch-3", "wall"} <= set(cells(page))
    page = shown(fvcheck.inspect_file(COARSE))
    assert {"U", "T", "patch-4", "body"} <= set(cells(page))
    hostile = replace(flow, case=replace(flow.case, file="<script>x</script>"))
    assert shown(hostile).of("script") == []


def test_a_report_shows_its_page_within_a_frame(flow):
    report = fvcheck.report(flow, BAR, ["mass"])
    page = shown(report)
    (frame,) = page.of("iframe")
    assert frame["srcdoc"] == report.html
