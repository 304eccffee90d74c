"""The page in a real browser: nothing is asked of the network, nothing fails, figures can be seen."""

import os
import shutil
from pathlib import Path

import pytest
from test_report import CHECK, DEMO, settings

import fvcheck

ROOT = Path(__file__).parent.parent

NAMES = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "chrome")


@pytest.fixture(scope="module")
def browser():
    """Headless Chromium: that of the machine, else the one that playwright has installed."""
    playwright = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    found = os.environ.get("FVCHECK_BROWSER") or next(filter(None, map(shutil.which, NAMES)), None)
    options = ["--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-dev-shm-usage"]
    with playwright.sync_playwright() as tool:
        try:
            opened = tool.chromium.launch(executable_path=found, args=options)
        except playwright.Error as error:
            pytest.skip(f"no Chromium to open the page with: {str(error).splitlines()[0]}")
        yield opened
        opened.close()


@pytest.fixture(scope="module")
def page_file(tmp_path_factory):
    path = tmp_path_factory.mktemp("page") / "demo.html"
    bodies = {"patch-4": {"velocity": 0.12, "length": 0.004, "density": 1.2}}
    fvcheck.report(DEMO, laws=["mass", "momentum"], path=path, bodies=bodies, beside=[CHECK], **settings())
    return path


@pytest.fixture(scope="module")
def open_file(tmp_path_factory):
    """A run that is not done, as a series: histories and maps are in it."""
    path = tmp_path_factory.mktemp("page") / "open.html"
    files = [ROOT / "meshes" / f"demo-coarse-{n}.vtu" for n in ("0005", "0020")]
    fvcheck.report(files, laws=["mass", "momentum"], steady=True, path=path, **settings())
    return path


def look(browser, path, **settings):
    """The page opened, with what it asked for and complained of."""
    asked, said = [], []
    page = browser.new_page(viewport={"width": 1000, "height": 800}, **settings)
    page.on("request", lambda request: asked.append(request.url))
    page.on("console", lambda message: said.append(message.text))
    page.on("pageerror", lambda error: said.append(str(error)))
    page.goto(path.as_uri())
    page.wait_for_load_state("networkidle")
    return page, asked, said


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_page_opens_without_errors_and_without_the_network(browser, page_file, open_file, scheme):
    for path in (page_file, open_file):
        page, asked, said = look(browser, path, color_scheme=scheme)
        assert [url for url in asked if not url.startswith("data:")] == [path.as_uri()]
        assert said == []
        page.close()


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_every_figure_is_seen_in_both_schemes(browser, page_file, open_file, scheme):
    from io import BytesIO

    from PIL import Image

    for path in (page_file, open_file):
        page, _, _ = look(browser, path, color_scheme=scheme)
        figures = page.locator("svg.drawing")
        assert figures.count() > 5
        for k in range(figures.count()):
            box = figures.nth(k).bounding_box()
            assert box["width"] > 300 and box["height"] > 80
            with Image.open(BytesIO(figures.nth(k).screenshot())) as image:
                shades = image.convert("L").resize((200, 100)).getextrema()
            # Ink on paper: both dark and light are there.
            assert shades[1] - shades[0] > 90
        page.close()


def channels(colour):
    """Relative luminance of a CSS colour rgb(r, g, b) (WCAG 2.1, 1.4.3, recalled from memory)."""
    values = [float(v) / 255 for v in colour[colour.index("(") + 1 : -1].split(",")[:3]]
    linear = [v / 12.92 if v <= 0.04045 else ((v + 0.055) / 1.055) ** 2.4 for v in values]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_texts_stand_out_from_the_page_in_both_schemes(browser, open_file, scheme):
    page, _, _ = look(browser, open_file, color_scheme=scheme)
    paper = channels(page.evaluate("getComputedStyle(document.documentElement).backgroundColor"))
    assert (paper > 0.9) == (scheme == "light")
    for selector in (
        "p",
        "td",
        "th",
        "figcaption",
        "caption",
        "td.verdict",
        ".banner .word",
        "svg.drawing text",
    ):
        what = "fill" if "svg" in selector else "color"
        ink = channels(page.evaluate(
            f"getComputedStyle(document.querySelector({selector!r})).{what}"
        ))  # fmt: skip
        contrast = (max(ink, paper) + 0.05) / (min(ink, paper) + 0.05)
        assert contrast >= 4.5, selector  # WCAG 2.1 AA for text
    page.close()


def test_nothing_runs_out_of_a_narrow_window_and_long_tables_scroll(browser, page_file):
    page, _, _ = look(browser, page_file)
    for width in (1000, 480):
        page.set_viewport_size({"width": width, "height": 800})
        assert page.evaluate("document.documentElement.scrollWidth") <= width
    assert page.evaluate(
        "[...document.querySelectorAll('.scroll')].some(box => box.scrollWidth > box.clientWidth)"
    )
    page.close()


def test_the_page_prints_on_white_with_nothing_cut_off(browser, page_file):
    page, _, _ = look(browser, page_file, color_scheme="dark")
    page.emulate_media(media="print")
    ink = channels(page.evaluate("getComputedStyle(document.body).color"))
    assert ink < 0.1  # dark ink, though the screen is dark
    assert page.evaluate("getComputedStyle(document.querySelector('.scroll')).overflow") == "visible"
    # A4 between margins of 12 mm at 96 dots per inch.
    page.set_viewport_size({"width": 703, "height": 1000})
    over = page.evaluate(
        "[...document.querySelectorAll('table, figure')].filter(e => e.getBoundingClientRect().right > 704)"
        ".map(e => e.textContent.slice(0, 60))"
    )
    assert over == []
    pdf = page.pdf(prefer_css_page_size=True)
    assert pdf.startswith(b"%PDF") and len(pdf) > 50_000
    page.close()
