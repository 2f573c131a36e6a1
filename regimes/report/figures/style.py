"""One look for all figures: sizes, colours that everybody can tell apart, axes, files of equal bytes."""

import io
import re
from collections.abc import Callable
from functools import wraps

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.figure import Figure, SubFigure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter, NullLocator

from regimes.analysis import Analysis, SinglesOnly

# Okabe & Ito (2008), Color universal design: values of their palette.
BLACK, BLUE, ORANGE, GREEN = "#000000", "#0072B2", "#E69F00", "#009E73"
VERMILION, PURPLE, SKY = "#D55E00", "#CC79A7", "#56B4E9"
INK, GREY, PALE = "#1a1a1a", "#6b6b6b", "#d9d9d9"

COLOUR = {"ballistic": GREEN, "exponential": BLUE, "richardson": VERMILION, "diffusive": PURPLE}
LINE = {
    "ballistic": (0, (6, 1.5, 1, 1.5)),
    "exponential": "-",
    "richardson": (0, (5, 1.6)),
    "diffusive": (0, (1.2, 1.2)),
}
HATCH = {"ballistic": "..", "exponential": "", "richardson": "//", "diffusive": "\\\\"}

SIZE = (4.9, 3.75)  # inches; wide enough for one column of a page, letters readable at 360 px
STYLE = {
    "font.family": ["DejaVu Sans"],
    "font.size": 10.5,
    "axes.labelsize": 11,
    "axes.titlesize": 11,
    "legend.fontsize": 9.5,
    "xtick.labelsize": 10.5,
    "ytick.labelsize": 10.5,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.direction": "out",
    "lines.linewidth": 1.6,
    "hatch.linewidth": 0.5,
    "legend.frameon": False,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
}


def figure_function(plot: Callable[..., Axes]) -> Callable[..., Axes]:
    """Give a plotting function an optional `ax` and the common style, without touching global settings."""

    @wraps(plot)
    def drawn(analysis: Analysis | SinglesOnly, ax: Axes | None = None) -> Axes:
        with matplotlib.rc_context(STYLE):
            return plot(analysis, new_axes() if ax is None else ax)

    return drawn


def panels_function(plot: Callable[..., tuple[Axes, ...]]) -> Callable[..., tuple[Axes, ...]]:
    """The same for a function that draws several panels: in a figure of its own, or in one that is given."""

    @wraps(plot)
    def drawn(analysis: Analysis, figure: Figure | SubFigure | None = None) -> tuple[Axes, ...]:
        with matplotlib.rc_context(STYLE):
            return plot(analysis, figure)

    return drawn


def panels(figure: Figure | SubFigure | None, n: int, columns: int, height: float) -> tuple[Axes, ...]:
    """Axes in rows of `columns`; a figure of its own has rows `height` inches high."""
    rows = -(-n // columns)
    own = Figure(figsize=(SIZE[0], height * rows), layout="constrained") if figure is None else figure
    return tuple(own.add_subplot(rows, columns, i + 1) for i in range(n))


def new_axes() -> Axes:
    """Axes of a new figure that no window knows of."""
    return Figure(figsize=SIZE, layout="constrained").add_subplot()


def log_axis(axis: Axis, sparse: bool = False) -> None:
    """Plain numbers on a logarithmic axis; also at 2 and 5 where fewer than 2.5 decades are shown.

    With `sparse`, for small panels, also at 2 and 5 only where fewer than two powers of ten are shown, and
    minor ticks over two decades at most.
    """
    low, high = axis.get_view_interval()
    decades = np.log10(high / low)
    powers = np.floor(np.log10(high)) - np.ceil(np.log10(low)) + 1
    few = powers < 2 if sparse else decades <= 2.5
    steps = (1.0, 2.0, 5.0) if few else (1.0,)
    if decades < (0.4 if sparse else 0.75):
        steps = (1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0)
    axis.set_major_locator(LogLocator(10.0, subs=steps, numticks=5 if sparse and powers > 4 else 30))
    axis.set_major_formatter(FuncFormatter(_plain))
    if decades <= (2 if sparse else 6):
        axis.set_minor_locator(LogLocator(10.0, subs=np.arange(2.0, 10.0), numticks=100))
    else:
        axis.set_minor_locator(NullLocator())
    axis.set_minor_formatter(NullFormatter())


def _plain(value: float, _position: int) -> str:
    if value >= 1e6 or value < 1e-4:
        return rf"$10^{{{round(np.log10(value))}}}$"
    return f"{value:.10g}"


def svg(figure: Figure, name: str) -> str:
    """The figure as SVG text; letters as outlines, no date, identifiers that start with `name`."""
    settings = {"svg.fonttype": "path", "svg.hashsalt": name}
    with matplotlib.rc_context(settings):
        stream = io.StringIO()
        figure.savefig(stream, format="svg", metadata={"Date": None, "Creator": None, "Title": name})
    return prefixed(stream.getvalue(), name)


def prefixed(text: str, name: str) -> str:
    """SVG text whose identifiers cannot meet those of another figure on the same page."""
    text = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', text)
    text = re.sub(r'href="#([^"]+)"', rf'href="#{name}-\1"', text)
    return re.sub(r"url\(#([^)]+)\)", rf"url(#{name}-\1)", text)


def pdf(figure: Figure, name: str) -> bytes:
    """The figure as PDF, without a date."""
    with matplotlib.rc_context({"pdf.fonttype": 42}):
        stream = io.BytesIO()
        figure.savefig(stream, format="pdf", metadata={"CreationDate": None, "Title": name})
    return stream.getvalue()
