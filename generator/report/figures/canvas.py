"""A matplotlib figure becomes SVG markup that belongs into a page.

The markup is deterministic, takes its colours from the page's CSS variables (so that one drawing
serves light and dark), carries a title and a description, and has ids of its own in the page.
"""

from __future__ import annotations

import io
import re
from html import escape
from unicodedata import east_asian_width

import matplotlib as mpl
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure

#: Colours that stand for the theme's: drawn with, then replaced by CSS variables.
INK = "#fe0101"
MUTED = "#fe0102"
LINE = "#fe0103"
LOT = "#fe0104"
INNER = "#fe0105"
WINDOW = "#fe0106"
BLEND = "#fe0107"
BAD = "#fe0108"
FILL = "#fe0109"
PAPER = "#fe010a"

_VARIABLES = {
    INK: "--ink",
    MUTED: "--muted",
    LINE: "--rule",
    LOT: "--lot",
    INNER: "--inner",
    WINDOW: "--window",
    BLEND: "--blend",
    BAD: "--bad",
    FILL: "--hull",
    PAPER: "--paper",
}

#: How wide every figure is, in SVG units: narrow enough that its text can be read on a telephone.
WIDTH = 420.0
#: Size of text in figures, in SVG units, and the share of it that an average character is wide.
TEXT_SIZE = 12.0
SMALL_SIZE = 11.0
CHARACTER_WIDTH = 0.58
#: Characters of East Asian scripts are as wide as the text is high.
_WIDE = 1.75
#: Bold text is wider by this factor.
BOLD = 1.12

# The defaults are set once, here: a context around each drawing would not be safe between threads,
# and a reader's own matplotlibrc must not change the bytes of a page.
mpl.rcdefaults()
mpl.rcParams.update(
    {
        "svg.fonttype": "none",
        "svg.hashsalt": "hullbook",
        "font.family": "sans-serif",
        "font.sans-serif": ["DejaVu Sans"],
        "font.size": SMALL_SIZE,
        "axes.unicode_minus": True,
        "text.usetex": False,
        "text.parse_math": False,
        "path.simplify": False,
    }
)


def blank(width: float, height: float) -> Figure:
    """An empty figure of ``width`` × ``height`` SVG units, without a background."""
    figure = Figure(figsize=(width / 72, height / 72), dpi=72)
    figure.patch.set_visible(False)
    FigureCanvasSVG(figure)
    return figure


def markup(figure: Figure) -> str:
    """The figure's SVG without prolog, metadata and fixed colours; ids as matplotlib gave them."""
    stream = io.StringIO()
    figure.savefig(stream, format="svg", metadata={"Date": None, "Creator": None, "Format": None, "Type": None})
    text = stream.getvalue()
    text = text[text.index("<svg") :]
    for needless in (r"<metadata>.*?</metadata>", r"<!--.*?-->", r"<style.*?</style>"):
        text = re.sub(needless, "", text, flags=re.DOTALL)
    text = re.sub(r"<defs>\s*</defs>", "", text)
    return re.sub(r">\s+<", "><", re.sub(r"<[^>]*>", _tidy, text))


def _tidy(match: re.Match[str]) -> str:
    """One tag (never text, which may look like anything): short numbers, the theme's colours and font."""
    tag = re.sub(r"\s+", " ", match.group(0))
    tag = re.sub(r"-?\d+\.\d{2,}", lambda number: short(float(number.group(0))), tag)
    tag = re.sub(r"font-family: [^;\"]*", "font-family: var(--figure-font, sans-serif)", tag)
    tag = re.sub(r' transform="rotate\(-0[^"]*"', "", tag)
    tag = re.sub(r'<g id="[^"]*"', "<g", tag)
    for colour, variable in _VARIABLES.items():
        tag = tag.replace(colour, f"var({variable})")
    return tag


def short(number: float) -> str:
    """A place as text: tenths of an SVG unit, and never "-0"."""
    return f"{number:.1f}".removesuffix(".0").replace("-0", "0" if abs(number) < 0.05 else "-0")


def finished(text: str, key: str, title: str, description: str, overlay: str = "") -> str:
    """Markup for a page: ids begin with ``key``, and a title and a description tell what is seen.

    ``overlay`` is SVG drawn above the figure.
    """
    inner = text[text.index(">") + 1 : text.rindex("</svg>")]
    inner = re.sub(r"<[^>]*>", lambda match: _prefixed(match.group(0), key), inner)
    box = re.search(r'viewBox="([^"]+)"', text)
    view = box.group(1) if box else "0 0 1 1"
    return (
        f'<svg class="figure" xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" '
        f'viewBox="{view}" role="img" aria-labelledby="{key}-title {key}-desc">'
        f'<title id="{key}-title">{escape(title)}</title><desc id="{key}-desc">{escape(description)}</desc>'
        f"{inner}{overlay}</svg>"
    )


def _prefixed(tag: str, key: str) -> str:
    tag = re.sub(r'\bid="([^"]+)"', rf'id="{key}-\1"', tag)
    tag = re.sub(r"url\(#([^)]+)\)", rf"url(#{key}-\1)", tag)
    return re.sub(r'xlink:href="#([^"]+)"', rf'xlink:href="#{key}-\1"', tag)


def width_of(text: str, size: float = SMALL_SIZE) -> float:
    """About how wide ``text`` is drawn, in SVG units; rather too much than too little."""
    return sum(_WIDE if east_asian_width(character) in "WF" else 1.0 for character in text) * size * CHARACTER_WIDTH


def fitted(text: str, room: float, size: float = SMALL_SIZE) -> str:
    """``text``, cut with an ellipsis where it would be wider than ``room`` SVG units."""
    if width_of(text, size) <= room:
        return text
    kept = text
    while kept and width_of(kept + "…", size) > room:
        kept = kept[:-1]
    return kept.rstrip() + "…"
