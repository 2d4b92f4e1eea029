"""What all plots share: palette, canvas, titles, ticks in engineering notation, SVG that is the same every time.

Colours differ in lightness as well as in hue, so that they stay apart for a colour-blind eye and in a grey print:
ink and curve dark, marks middle, bands light; what is forbidden is hatched besides.
"""

from __future__ import annotations

import io
import math
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from synth.quantity import format_si

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Text

INK = "#1d2430"  # text and axes
FAINT = "#d9dde3"  # grid
CURVE = "#12466b"  # the quantity shown
MARK = "#a83f12"  # realized points, and the outline of what is forbidden
BAND = "#cfe3dc"  # what is allowed
BAND_EDGE = "#79ad9c"
REST = "#8fa3b3"  # second quantity of a panel

_STYLE: dict[str, Any] = {
    "svg.fonttype": "path",  # glyphs as outlines: no viewer needs the font
    "svg.hashsalt": "synth",
    "font.family": ["DejaVu Sans"],
    "font.size": 9.0,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "axes.grid": True,
    "grid.color": FAINT,
    "grid.linewidth": 0.6,
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "hatch.linewidth": 0.7,
    "legend.frameon": False,
    "legend.fontsize": 8.0,
    "lines.solid_capstyle": "round",
}
_DOCTYPE = re.compile(rb"<!DOCTYPE[^>]*>\s*")
_HEAD = 0.9  # [inch] above the panels, for title, subtitle and the panel's own
_MARGIN = 0.16  # [inch] left of the title


@contextmanager
def styled() -> Iterator[None]:
    """The settings under which a figure is built and written, whatever the person's own are; undone at the end."""
    import matplotlib as mpl

    with mpl.rc_context():
        mpl.rcdefaults()
        for key, value in _STYLE.items():
            mpl.rcParams[key] = value  # type: ignore[index]
        yield


def new_figure(title: str, subtitle: str, width: float, height: float) -> Figure:
    """An empty figure [inch] with its title and, smaller, what was found; both are plain text, never mathematics."""
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), facecolor="white")
    FigureCanvasSVG(figure)
    for text, top, size, weight in ((title, 0.12, 12, "bold"), (subtitle, 0.38, 9, "normal")):
        place = (_MARGIN / width, 1 - top / height)
        line = figure.text(*place, shown(text), size=size, weight=weight, va="top", parse_math=False)
        _fit(line, 72 * (width - 2 * _MARGIN))
    return figure


def _fit(text: Text, room: float) -> None:
    """Cut a line of text so that it is no wider than `room` [points]."""
    figure = text.get_figure(root=True)
    assert figure is not None
    whole = text.get_text()
    kept = len(whole)
    while kept and 72 * text.get_window_extent().width / figure.dpi > room:
        kept -= max(1, kept // 25)
        text.set_text(whole[:kept].rstrip() + "...")


def add_panel(figure: Figure, left: float, right: float, title: str, bottom: float = 0.85) -> Axes:
    """Axes under the title, from `left` to `right` of the figure and `bottom` above its lower edge [inch].

    Panels are placed by hand: a layout solver does not return the same last digits twice, and they show in the file.
    """
    width, height = figure.get_size_inches()
    box = (left / width, bottom / height, (right - left) / width, (height - _HEAD - bottom) / height)
    axes = figure.add_axes(box)
    _fit(axes.set_title(title, loc="left", size=9, pad=7, parse_math=False), 72 * (right - left))
    return axes


def add_legend(figure: Figure, panels: Sequence[Axes]) -> None:
    """One legend for all panels, in a row at the lower edge; a label that comes up twice is shown once."""
    pairs: dict[str, Artist] = {}
    for axes in panels:
        for handle, label in zip(*axes.get_legend_handles_labels(), strict=True):
            pairs.setdefault(str(label), handle)
    figure.legend(
        list(pairs.values()),
        list(pairs),
        loc="lower center",
        ncols=len(pairs),
        bbox_to_anchor=(0.5, 0.06 / figure.get_size_inches()[1]),
        borderaxespad=0,
    )


def svg_bytes(figure: Figure, title: str) -> bytes:
    """The figure as SVG that refers to nothing outside; the same figure gives the same bytes."""
    buffer = io.BytesIO()
    metadata = {"Date": None, "Creator": None, "Title": shown(title)}
    figure.savefig(buffer, format="svg", metadata=metadata)
    return _DOCTYPE.sub(b"", buffer.getvalue(), count=1)


def shown(text: str, limit: int = 200) -> str:
    """Text as the figure's font can draw it: one line, at most `limit` characters, an empty box for a foreign one."""
    glyphs = _glyphs()
    line = " ".join(text.split())
    line = line if len(line) <= limit else line[: limit - 3].rstrip() + "..."
    return "".join(char if ord(char) in glyphs else "\u25a1" for char in line)


def _glyphs() -> Mapping[int, object]:
    from matplotlib.font_manager import FontProperties, findfont, get_font

    return get_font(findfont(FontProperties(family="DejaVu Sans"))).get_charmap()


def engineering_ticks(unit: str) -> Callable[[float, object], str]:
    """Tick labels such as '10 kHz' for a logarithmic axis."""

    def label(value: float, _position: object) -> str:
        return format_si(value, unit, 3)

    return label


def scale_for(largest: float) -> tuple[float, str]:
    """Power of a thousand and its prefix that bring a linear axis to handy numbers.

    >>> scale_for(102e3), scale_for(3e-5)
    ((1000.0, 'k'), (1e-06, 'u'))
    """
    prefix = format_si(abs(largest), "Hz", 3).partition(" ")[2].removesuffix("Hz")
    exponents = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9, "T": 12}
    return 10.0 ** exponents[prefix], prefix


def log_frequency_axis(axes: Axes, low: float, high: float) -> None:
    """A logarithmic frequency axis [Hz] with a label a decade."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    axes.set_xscale("log")
    axes.set_xlim(low, high)
    axes.xaxis.set_major_locator(LogLocator(10, numticks=20))
    axes.xaxis.set_major_formatter(FuncFormatter(engineering_ticks("Hz")))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlabel("frequency")


def band_edges(center: float, width: float) -> tuple[float, float]:
    """Edges [Hz] of a band `width` wide whose geometric mean is `center`.

    >>> low, high = band_edges(100e3, 5e3)
    >>> round(high - low, 6), round(low * high)
    (5000.0, 10000000000)
    """
    middle = math.hypot(center, width / 2)
    return middle - width / 2, middle + width / 2
