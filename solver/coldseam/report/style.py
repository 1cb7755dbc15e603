"""One look for every picture: colours, lines, text, round values, and the page they stand on.

The colour map is matplotlib's "cividis": its lightness rises evenly from end to end, so that equal
temperature steps look equal, a grey print keeps the order, and it was optimised to look nearly the
same with and without red-green colour blindness (Nunez, Anderson, Renslow 2018, PLOS ONE 13(7)
e0199239). Cold is dark blue, warm is light yellow. Lines are told apart by colour *and* dash
pattern, bodies by tint *and* hatch, faces by tint *and* number: no picture needs colour. The line colours are
those that Okabe and Ito chose for the colour-blind (2008, "Color Universal Design"), from memory.
"""

from __future__ import annotations

import math
import textwrap
from contextlib import contextmanager
from functools import lru_cache

import numpy as np

from coldseam.report.shown import Shown

COLOUR_MAP = "cividis"
INK, SOFT, FAINT, PAPER = "#1b1f24", "#5b636e", "#b9bfc7", "#ffffff"
TEXT, SMALL, HEAD = 8.5, 7.5, 11.0
"""Font sizes, points."""
HAIR, THIN, BOLD = 0.5, 0.8, 2.2
"""Line weights, points."""
DPI = 150

LINES = ("#0072b2", "#d55e00", "#009e73", "#a3558a", "#8a6d00", "#3a9bd9", "#7a3b1e", "#4b4fa3")
DASHES = ("solid", (0, (6, 1.6)), (0, (2.4, 1.2)), (0, (7, 1.4, 1.4, 1.4)), (0, (1, 1)))
ADIABATIC = ("#7d858f", (0, (1.2, 1.6)))
TINTS = (
    "#e9eef4", "#f6dfc4", "#c9dfd2", "#eed3dd", "#d5d1ea", "#f4efc0", "#bcd7ea", "#e2cfc0",
    "#d3e6b5", "#d9d9d9", "#c3e3e0", "#f3d0c6",
)  # fmt: skip
HATCHES = ("", "////", "....", "\\\\\\\\", "xxxx", "----", "||||", "oo", "++++", "**", "///...", "\\\\\\...")
FACES = (
    "#8fb8de", "#f0b27a", "#8ccbb0", "#d9a3c2", "#d6c36a", "#a9a6dc", "#c99a83", "#7fc4d1",
    "#b7cf85", "#e3a39a",
)  # fmt: skip
FACE_ADIABATIC = "#d5d9de"


@contextmanager
def applied():
    """Draw with this style inside the ``with`` block; the caller's settings come back afterwards."""
    import matplotlib

    settings = {
        "font.family": "DejaVu Sans",
        "font.size": TEXT,
        "text.color": INK,
        "axes.edgecolor": SOFT,
        "axes.labelcolor": INK,
        "axes.labelsize": TEXT,
        "axes.linewidth": HAIR,
        "axes.unicode_minus": True,
        "xtick.color": SOFT,
        "ytick.color": SOFT,
        "xtick.labelcolor": INK,
        "ytick.labelcolor": INK,
        "xtick.labelsize": SMALL,
        "ytick.labelsize": SMALL,
        "xtick.major.width": HAIR,
        "ytick.major.width": HAIR,
        "hatch.linewidth": 0.45,
        "legend.frameon": False,
        "legend.fontsize": SMALL,
        "figure.facecolor": PAPER,
        "savefig.facecolor": PAPER,
        "figure.dpi": DPI,
        "svg.fonttype": "path",
        "svg.hashsalt": "coldseam",
        "text.parse_math": False,  # names are shown as typed, "$" included
        "path.simplify": True,
    }
    with matplotlib.rc_context(settings):
        yield


def plain(text: str) -> str:
    """Return a user's text fit for one line of a picture."""
    text = "".join(letter if letter.isprintable() or letter == "\u00a0" else " " for letter in text).strip()
    return f"\u2009{text}" if text.startswith("_") else text  # legends hide labels that begin with "_"


def shortened(text: str, most: int = 44) -> str:
    """Return a text of at most ``most`` letters, its middle left out if need be."""
    text = plain(text)
    if len(text) <= most:
        return text
    head = (most - 1) * 2 // 3
    return f"{text[:head]}…{text[len(text) - (most - 1 - head) :]}"


def wrapped(text: str, inches: float, size: float, most_lines: int = 3, *, bold: bool = False) -> str:
    """Return a text broken into lines that fit a width, measured with the font itself."""
    text = plain(text)
    letters = max(8, int(inches * 72 / (0.52 * size)))
    while letters > 8:
        lines = textwrap.wrap(text, letters, max_lines=most_lines, placeholder=" …") or [""]
        if max(text_width(line, size, bold) for line in lines) <= inches:
            break
        letters = int(letters * 0.93)
    return "\n".join(lines)


@lru_cache(maxsize=4096)
def text_width(text: str, size: float, bold: bool = False) -> float:
    """Return how wide a line of text is, inches."""
    from matplotlib.font_manager import FontProperties, findfont, get_font

    font = get_font(findfont(FontProperties(family="DejaVu Sans", weight="bold" if bold else "normal")))
    font.set_size(size, 72)
    font.set_text(text, 0.0)
    return font.get_width_height()[0] / 64 / 72


# -------------------------------------------------------------------------------------- numbers


def round_step(step: float) -> float:
    """Return the nearest of 1, 2, 2.5, 5 times a power of ten (nearest in ratio).

    >>> round_step(0.0031), round_step(17), round_step(21.0)
    (0.0025, 20.0, 20.0)
    """
    if not step > 0 or not math.isfinite(step):
        raise ValueError("a step is a positive number")
    decade = 10.0 ** math.floor(math.log10(step))
    best = min((1.0, 2.0, 2.5, 5.0, 10.0), key=lambda nice: abs(math.log(step / decade / nice)))
    return float(f"{best * decade:.12g}")


def round_levels(low: float, high: float, about: int = 9) -> np.ndarray:
    """Return round values strictly between two temperatures, about as many as asked.

    Empty when the two are the same within what a picture can show.

    >>> round_levels(-20, 25).tolist()
    [-15.0, -10.0, -5.0, 0.0, 5.0, 10.0, 15.0, 20.0]
    """
    span = high - low
    if not math.isfinite(span) or span <= 1e-6 * max(1.0, abs(low), abs(high)):
        return np.empty(0)
    step = round_step(span / about)
    first, last = math.floor(low / step), math.ceil(high / step)
    levels = np.array([float(f"{k * step:.12g}") for k in range(first, last + 1)])
    margin = 1e-6 * span
    return levels[(levels > low + margin) & (levels < high - margin)]


def decimals(levels: np.ndarray) -> int:
    """Return the number of decimals that tell values of any unit, shape (n,), apart and show each exactly."""
    for count in range(7):
        if np.allclose(
            np.round(levels, count), levels, rtol=0, atol=1e-9 * max(1.0, float(np.abs(levels).max(initial=0)))
        ):
            return count
    return 7


def degrees(value: float, places: int = 1) -> str:
    """Return a temperature as read in print.

    >>> degrees(-12.345), degrees(-0.01), degrees(5, 0)
    ('−12.3 °C', '0.0 °C', '5 °C')
    """
    return amount(value, places, "°C")


def amount(value: float, places: int, unit: str) -> str:
    """Return a value with so many decimals and its unit.

    >>> amount(-3.456, 1, "W/m²"), amount(99.6, 0, "%")
    ('−3.5 W/m²', '100 %')
    """
    text = f"{value:.{places}f}"
    if float(text) == 0:
        text = text.lstrip("-")
    return f"{text.replace('-', '−')} {unit}"


def number(value: float, digits: int = 3) -> str:
    """Return a number of so many significant digits without an exponent where that stays short.

    >>> number(0.012345), number(1234.5), number(2.5e-9), number(0)
    ('0.0123', '1234', '2.5e−09', '0')
    """
    if value == 0:
        return "0"
    if not math.isfinite(value):
        return "–"
    size = math.floor(math.log10(abs(value)))
    if -5 <= size <= 6:
        text = f"{value:.{max(0, digits - 1 - size)}f}"
        text = text.rstrip("0").rstrip(".") if "." in text else text
    else:
        text = f"{value:.{digits}g}"
    return text.replace("-", "−")


def area_text(area: float, shown: Shown) -> str:
    """Return an area (m², or m² per metre of depth) with its unit; small ones in cm² or in²."""
    if area >= 0.01:
        return f"{number(shown.value('area', area))} {shown.unit('area')}"
    unit, small, parts = ("m²", "cm²", 1e4) if shown.system == "metric" else ("ft²", "in²", 144.0)
    return f"{number(shown.value('area', area) * parts)} {shown.unit('area').replace(unit, small)}"


def boundary_line(index: int, kind: str) -> tuple[str, object]:
    """Return colour and dash pattern of a boundary; adiabatic ones are grey and dotted."""
    if kind == "adiabatic":
        return ADIABATIC
    return LINES[index % len(LINES)], DASHES[(index + index // len(LINES)) % len(DASHES)]


def face_colour(index: int, kind: str) -> str:
    """Return the tint of a boundary's faces in space."""
    return FACE_ADIABATIC if kind == "adiabatic" else FACES[index % len(FACES)]


def body_fill(index: int) -> tuple[str, str]:
    """Return tint and hatch of a body; the pair repeats after 132 bodies."""
    return TINTS[index % len(TINTS)], HATCHES[(index + index // len(TINTS)) % len(HATCHES)]


def halo(width: float = 2.0):
    """Return a path effect: a white edge round text, so that it reads on any ground."""
    from matplotlib import patheffects

    return [patheffects.withStroke(linewidth=width, foreground=PAPER)]


def contrast(shade: float) -> str:
    """Return the line colour that shows on a shade (0 cold, 1 warm) of the colour map."""
    return "#f4f6f8" if shade < 0.45 else INK
