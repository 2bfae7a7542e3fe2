"""How pictures look: sizes of a journal page, fonts, colours, units in words.

Colours differ in luminance as well, and nothing is told apart by colour alone: what is sampled has
markers, what is exact a thin line, the infinite system a broad dashed one.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from contextlib import contextmanager
from math import floor, log10
from typing import TYPE_CHECKING, Any

from pairmc.errors import InputError, Problem

if TYPE_CHECKING:
    from matplotlib.axis import Axis
    from matplotlib.figure import SubFigure

# Width of one column and of both columns of a journal page, millimetres.
COLUMN = 85.0
PAGE = 170.0
MILLIMETRES_PER_INCH = 25.4
MILLIMETRES_PER_POINT = MILLIMETRES_PER_INCH / 72.0

# Points; nothing is set smaller than the first.
FONT_SIZE = 7.0
TITLE_SIZE = 8.0

DARK = "#000000"
LIKE = "#0a5a9c"
UNLIKE = "#c4690a"
LIGHT = "#a6a6a6"
BAND = "#ececec"

SETTINGS: Any = {
    "font.family": ["DejaVu Sans"],
    "font.size": FONT_SIZE,
    "axes.labelsize": FONT_SIZE,
    "axes.titlesize": FONT_SIZE,
    "axes.titlepad": 4.0,
    "axes.labelpad": 2.5,
    "axes.linewidth": 0.6,
    "xtick.labelsize": FONT_SIZE,
    "ytick.labelsize": FONT_SIZE,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "legend.fontsize": FONT_SIZE,
    "legend.title_fontsize": FONT_SIZE,
    "legend.frameon": False,
    "legend.borderpad": 0.2,
    "figure.titlesize": TITLE_SIZE,
    "figure.dpi": 300.0,
    "savefig.dpi": 300.0,
    "mathtext.fontset": "dejavusans",
    "pdf.fonttype": 42,
    "svg.hashsalt": "pairmc",
}

_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_UNIT_WORDS = {"um": "µm", "angstrom": "Å"}


@contextmanager
def style() -> Iterator[None]:
    """Draw with these settings alone, whatever the user's own settings of matplotlib are.

    Raises
    ------
    InputError
        Where matplotlib is not installed.
    """
    try:
        import matplotlib
    except ModuleNotFoundError as error:
        if error.name != "matplotlib":
            raise
        raise InputError(
            Problem("pictures", "no matplotlib here", "", "pip install 'pairmc[plot]'")
        ) from error
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(SETTINGS)
        yield


def inches(width: float, height: float) -> tuple[float, float]:
    """Return a size in millimetres as inches."""
    return width / MILLIMETRES_PER_INCH, height / MILLIMETRES_PER_INCH


def width_of(panel: SubFigure) -> float:
    """Return the width of a panel in millimetres."""
    return float(panel.bbox.width) / panel.get_figure(root=True).dpi * MILLIMETRES_PER_INCH


def power_of(base: str, power: int) -> str:
    """Return ``base`` to a power, in print: ``µm⁻²``, ``10¹²``."""
    return base if power == 1 else base + str(power).translate(_SUPERSCRIPTS)


def unit_in_words(length_unit: str, power: int, exponent: int = 0) -> str:
    """Return a power of a length unit for the label of an axis.

    Parameters
    ----------
    length_unit
        As in a result file: ``um``, ``bohr``; empty where the run gives none.
    power
        Of the length.
    exponent
        The numbers at the ticks are to be multiplied by 10 to this.
    """
    base = _UNIT_WORDS.get(length_unit, length_unit)
    if base:
        unit = power_of(base, power)
    else:
        unit = "length unit" if power == 1 else power_of("length unit", power)
    return f"{power_of('10', exponent)} {unit}" if exponent else unit


def exponent_for(largest: float) -> int:
    """Return the power of ten to set beside the unit, 0 where the numbers are short without."""
    exponent = floor(log10(largest))
    return 0 if -2 <= exponent <= 2 else exponent


def number_ticks(axis: Axis, most: int, exponent: int = 0) -> None:
    """Set round numbers with equal decimals at the ticks of an axis.

    Parameters
    ----------
    axis
        ``axes.xaxis`` or ``axes.yaxis``.
    most
        Intervals between ticks, at most.
    exponent
        Power of ten to take out of the numbers.
    """
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    scale = 10.0**exponent

    def text(value: float, _: int | None) -> str:
        short = [f"{tick / scale:.6g}" for tick in axis.get_majorticklocs()]
        decimals = max((len(number.partition(".")[2]) for number in short), default=0)
        return f"{round(value / scale, decimals) + 0.0:.{decimals}f}".replace("-", "−")

    axis.set_major_locator(MaxNLocator(most, steps=[1, 2, 2.5, 5, 10]))
    axis.set_major_formatter(FuncFormatter(text))


def text_width(text: str, size: float) -> float:
    """Return the width of a plain text in millimetres."""
    from matplotlib.textpath import TextPath

    if not text.strip():
        return 0.0
    box = TextPath((0.0, 0.0), literal(text), size=size).get_extents()
    return float(box.width) * MILLIMETRES_PER_POINT


def wrap(text: str, width: float, size: float, lines: int = 3) -> str:
    """Break a plain text into lines that are no wider than `width` millimetres.

    Parameters
    ----------
    text
        One line of text.
    width
        Millimetres.
    size
        Of the font, points.
    lines
        At most so many lines; what is left is cut and marked with an ellipsis.
    """

    def broken(characters: int) -> list[str]:
        return textwrap.wrap(text, characters, max_lines=lines, placeholder=" …")

    # Between what fits and what does not, by halves: the narrowest letters are a quarter as wide
    # as they are high.
    fits, too_many = 3, 4 + int(width / (0.25 * size * MILLIMETRES_PER_POINT))
    while too_many - fits > 1:
        middle = (fits + too_many) // 2
        if all(text_width(line, size) <= width for line in broken(middle)):
            fits = middle
        else:
            too_many = middle
    return "\n".join(broken(fits))


def literal(text: str) -> str:
    """Return a text in which no dollar sign begins a formula."""
    return text.replace("$", r"\$")
