"""How figures look, and how they become part of a page that is light or dark.

Figures are drawn in the light colours. In the page each of our colours becomes
a CSS variable, so that one drawing serves both schemes and print.
"""

from __future__ import annotations

import base64
import io
import re
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from html import escape
from typing import Any

INK, MUTED, GRID, PAPER = "#21303b", "#5a6973", "#cfd8dc", "#fffefd"
OUT, IN = "#b34f14", "#12638a"
"""Of what flows out and in: they differ in lightness for every kind of colour vision too."""

SERIES = ("#0d6b8d", "#b8551b", "#6655a6", "#3c7a28", "#9b7a10", "#9c3a68", "#4d5d66", "#128a86")

VARIABLES = {
    INK: "ink",
    MUTED: "muted",
    GRID: "grid",
    PAPER: "paper",
    OUT: "out",
    IN: "in",
    **{colour: f"c{number}" for number, colour in enumerate(SERIES)},
}
"""Colour of a drawing -> CSS variable of the page."""

DARK = {
    "ink": "#e2e8ea",
    "muted": "#9fadb5",
    "grid": "#3b464d",
    "paper": "#161b1e",
    "out": "#f0a061",
    "in": "#6cbfe6",
    **dict(
        zip(
            (f"c{number}" for number in range(8)),
            ("#62bcdc", "#f0a061", "#b3a5ec", "#93c97c", "#dcbf5c", "#e694bb", "#aebbc2", "#5fd0ca"),
        )
    ),
}

MARKS = "osD^vPX*"

# Dots per inch of what is drawn as an image inside a figure, and of a PNG.
DPI = 150


@dataclass(frozen=True, eq=False)
class Drawing:
    """One figure of a report.

    name : file name without ending; title, words : heading and text alternative
    draw : makes the matplotlib Figure
    """

    name: str
    title: str
    words: str
    draw: Callable[[], Any]

    def svg(self, inline: bool = True) -> str:
        """As a part of a page (colours are its variables), or as a file of its own."""
        with drawing_style():
            text = _saved(self.draw(), "svg", self.name, transparent=inline).decode()
        return _inline(text, self) if inline else _alone(text, self)

    def png(self) -> bytes:
        with drawing_style():
            return _saved(self.draw(), "png", self.name, transparent=False)


_MINUS = re.compile(r"(?<![\w)-])-(?=\.?\d)|(?<=\de)-(?=\d)")


def minus(text: str) -> str:
    """Numbers within words with a true minus sign."""
    return _MINUS.sub("−", text)


def plain(text: object) -> str:
    """Text from a file for a drawing or a page: control characters as question marks."""
    return "".join(letter if letter.isprintable() else "?" for letter in str(text))


@contextmanager
def drawing_style() -> Iterator[None]:
    """Our settings of matplotlib, and none of the user's."""
    import matplotlib
    from cycler import cycler
    from matplotlib import rc_context
    from matplotlib.style import context

    settings = {
        "font.family": "sans-serif",
        "font.sans-serif": ["DejaVu Sans"],
        "font.size": 9,
        "axes.titlesize": 9.5,
        "axes.titlelocation": "left",
        "axes.labelsize": 9,
        "xtick.labelsize": 8,
        "ytick.labelsize": 8,
        "legend.fontsize": 8,
        "legend.frameon": False,
        # Names come from strangers: a dollar sign is a dollar sign.
        "text.parse_math": False,
        "text.usetex": False,
        "axes.spines.top": False,
        "axes.spines.right": False,
        "axes.linewidth": 0.9,
        "axes.grid": False,
        "grid.color": GRID,
        "grid.alpha": 1.0,
        "lines.linewidth": 1.5,
        "figure.facecolor": PAPER,
        "axes.facecolor": "none",
        "savefig.dpi": DPI,
        "svg.fonttype": "none",
        "svg.id": None,
        "axes.prop_cycle": cycler(color=list(SERIES)),
        **dict.fromkeys(("text.color", "axes.labelcolor", "axes.edgecolor"), INK),
        **dict.fromkeys(("xtick.color", "ytick.color"), MUTED),
        **dict.fromkeys(("xtick.labelcolor", "ytick.labelcolor"), INK),
    }
    known: Any = {name: value for name, value in settings.items() if name in matplotlib.rcParams}
    with context("default"), rc_context(known), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield


def _saved(figure: Any, kind: str, salt: str, transparent: bool) -> bytes:
    from matplotlib import rc_context

    out = io.BytesIO()
    metadata = {"Date": None, "Creator": None} if kind == "svg" else {"Software": None}
    with rc_context({"svg.hashsalt": salt}):
        figure.savefig(out, format=kind, transparent=transparent, metadata=metadata)
    return out.getvalue()


_ROOT = re.compile(r'<svg [^>]*viewBox="([^"]*)"[^>]*>', re.DOTALL)
_STYLE = re.compile(r"<defs>\s*<style[^>]*>.*?</style>\s*</defs>", re.DOTALL)
_FONTS = re.compile(r"(font: [^;\"']*?\d+(?:\.\d+)?px )[^;\"]*")
_FAMILY = re.compile(r"font-family: [^;\"]*")


# Colours of an image inside a figure: enough for a colour map, at a third of the size.
_COLOURS = 255

_IMAGE = re.compile(r"(data:image/png;base64,)([^\"']*)")

# An image with less than this share of half transparent dots has all of its colours opaque, or none.
_BLENDED = 0.02


def _smaller(found: re.Match[str]) -> str:
    """An embedded PNG with a palette."""
    import numpy as np
    from PIL import Image

    data = base64.b64decode(found[2])
    out = io.BytesIO()
    with Image.open(io.BytesIO(data)) as image:
        whole = image.convert("RGBA")
    alpha = np.asarray(whole)[:, :, 3]
    if np.mean((alpha > 0) & (alpha < 255)) > _BLENDED:
        whole.quantize(_COLOURS, method=Image.Quantize.FASTOCTREE).save(out, "png")
    else:
        palette = whole.convert("RGB").quantize(
            _COLOURS, method=Image.Quantize.MEDIANCUT, dither=Image.Dither.NONE
        )
        dots = np.array(palette)
        dots[alpha < 128] = _COLOURS
        shown = Image.fromarray(dots, "P")
        shown.putpalette((palette.getpalette() or [])[: 3 * _COLOURS])
        shown.save(out, "png", transparency=_COLOURS)
    best = min(data, out.getvalue(), key=len)
    return found[1] + base64.b64encode(best).decode()


def _inner(text: str, drawing: Drawing) -> tuple[str, str]:
    """View box, and what is inside the root element, ids made unique or dropped."""
    text = re.sub(r"<metadata>.*?</metadata>", "", text, count=1, flags=re.DOTALL)
    root = _ROOT.search(text)
    assert root is not None, "matplotlib writes a view box"
    inner = _STYLE.sub("", text[root.end() : text.rindex("</svg>")])
    inner = re.sub(r"<!--.*?-->", "", inner, flags=re.DOTALL)
    used = set(re.findall(r'(?:url\(#|href="#)([^)"]+)', inner))

    def renamed(found: re.Match[str]) -> str:
        return f' id="{drawing.name}-{found[1]}"' if found[1] in used else ""

    inner = re.sub(r' id="([^"]*)"', renamed, inner)
    inner = re.sub(r'(url\(#|href="#)', rf"\g<1>{drawing.name}-", inner)
    inner = _IMAGE.sub(_smaller, inner.replace("xlink:href", "href"))
    return root[1], re.sub(r"\n\s*", "\n", inner).strip()


def _inline(text: str, drawing: Drawing) -> str:
    box, inner = _inner(text, drawing)
    for colour, name in VARIABLES.items():
        inner = inner.replace(colour, f"var(--{name})")
    inner = _FAMILY.sub("font-family: inherit", _FONTS.sub(r"\1var(--font)", inner))
    name = drawing.name
    width = float(box.split()[2])
    return (
        f'<svg class="drawing" viewBox="{box}" style="max-width: {width / 11.5:.1f}rem" role="img" '
        f'aria-labelledby="{name}-title {name}-words">\n'
        f'<title id="{name}-title">{escape(drawing.title)}</title>\n'
        f'<desc id="{name}-words">{escape(minus(drawing.words))}</desc>\n{inner}\n</svg>'
    )


def _alone(text: str, drawing: Drawing) -> str:
    box, inner = _inner(text, drawing)
    _, _, width, height = box.split()
    return (
        '<?xml version="1.0" encoding="utf-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}pt" height="{height}pt" viewBox="{box}" '
        f'role="img">\n<title>{escape(drawing.title)}</title>\n<desc>{escape(minus(drawing.words))}</desc>\n'
        f"<style>*{{stroke-linejoin: round; stroke-linecap: butt}}</style>\n{inner}\n</svg>\n"
    )
