"""How figures look: one set of lines, markers and greys that also reads in print and without colour."""

from __future__ import annotations

import functools
import math
import textwrap
import warnings
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, ParamSpec, TypeVar

import numpy as np
import numpy.typing as npt

from transim.quantities import UNITS, format_quantity

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

__all__ = [
    "COLOURS",
    "DASHES",
    "MARKERS",
    "axis_scale",
    "draw_series",
    "drawn",
    "label_lines",
    "log_axis",
    "name_axis",
    "new_figure",
    "save_figure",
    "short",
]

Array = npt.NDArray[np.float64]
Shape = ParamSpec("Shape")
Drawing = TypeVar("Drawing")

#: Colours of neighbouring series differ in lightness too.
COLOURS = ("#17263f", "#c25a12", "#4b93b5", "#7b4b94", "#8c9a2b", "#a82c4f")
#: On and off lengths of each line style, in line widths; () is a solid line.
DASHES: tuple[tuple[float, ...], ...] = ((), (6, 2), (6, 1.5, 1, 1.5), (1.5, 1.5), (10, 2, 2, 2), (3, 1))
MARKERS = ("o", "s", "^", "D", "v", "P")
_GREY = "#5d6570"
_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}
_SETTINGS = {
    "text.parse_math": False,
    "text.usetex": False,
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 9.0,
    "axes.titlesize": 9.0,
    "axes.titlelocation": "left",
    "axes.labelsize": 9.0,
    "axes.edgecolor": _GREY,
    "axes.linewidth": 0.8,
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.formatter.useoffset": False,
    "axes.unicode_minus": True,
    "grid.color": "#d9dde2",
    "grid.linewidth": 0.6,
    "xtick.color": _GREY,
    "ytick.color": _GREY,
    "xtick.labelcolor": "black",
    "ytick.labelcolor": "black",
    "lines.linewidth": 1.4,
    "hatch.linewidth": 0.6,
    "svg.fonttype": "path",
    "svg.hashsalt": "transim",
    "figure.facecolor": "white",
    "savefig.facecolor": "white",
}
_LINE = 108


def drawn(function: Callable[Shape, Drawing]) -> Callable[Shape, Drawing]:
    """Let a function draw with the settings of this module, whatever those of the user are.

    Parameters
    ----------
    function : callable
        Makes a figure.

    Returns
    -------
    callable
        The same.
    """

    @functools.wraps(function)
    def wrapped(*args: Shape.args, **kwargs: Shape.kwargs) -> Drawing:
        with _settings():
            return function(*args, **kwargs)

    return wrapped


@contextmanager
def _settings() -> Iterator[None]:
    from matplotlib import rc_context, rcParamsDefault

    # the back end is not a matter of looks, and setting it would load one
    settings: dict[Any, Any] = {
        key: value for key, value in rcParamsDefault.items() if not key.startswith(("backend", "webagg"))
    }
    settings.update(_SETTINGS)
    with rc_context(settings), warnings.catch_warnings():
        # a letter that the font does not have is shown as a box
        warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
        yield


def new_figure(
    title: str, subtitle: str, rows: int = 1, columns: int = 1, *, height: float = 2.2, **sharing: Any
) -> tuple[Figure, npt.NDArray[np.object_]]:
    """Begin a figure.

    Parameters
    ----------
    title : str
        Of the design; broken into lines where it is long.
    subtitle : str
        What is shown.
    rows, columns : int
        Panels.
    height : float
        Of a row [inch].
    sharing : object
        ``sharex``, ``sharey`` of the panels.

    Returns
    -------
    Figure, ndarray of Axes, shape (rows, columns)
    """
    from matplotlib.figure import Figure

    lines = [*textwrap.wrap(title, _LINE), *textwrap.wrap(subtitle, _LINE)]
    figure = Figure(figsize=(9.0, 0.75 + 0.2 * len(lines) + height * rows), layout="constrained")
    figure.suptitle("\n".join(lines), x=0.012, ha="left", fontsize=10.5)
    panels = figure.subplots(rows, columns, squeeze=False, **sharing)
    return figure, panels


def save_figure(figure: Figure, path: Path) -> None:
    """Write a figure as PNG and as SVG.

    Parameters
    ----------
    figure : Figure
        The figure.
    path : Path
        The file without suffix; folders are made.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    with _settings():
        figure.savefig(path.parent / f"{path.name}.png", dpi=150, metadata={"Software": "transim"})
        # the layout is settled now, and finding it again takes as long as drawing
        figure.set_layout_engine("none")
        figure.savefig(path.parent / f"{path.name}.svg", metadata={"Date": None, "Creator": "transim"})


def axis_scale(unit: str, *values: Array | float) -> tuple[float, str]:
    """Choose the prefix that an axis is in.

    Parameters
    ----------
    unit : str
        SI unit of the values.
    values : ndarray or float
        What the axis shows.

    Returns
    -------
    float, str
        What to multiply with, and the unit with its prefix: for example 1e9 and ``ns``.
    """
    if unit == "1" or unit not in UNITS or not UNITS[unit].prefixed:
        return 1.0, unit
    largest = max((float(np.max(np.abs(value), initial=0.0)) for value in map(np.asarray, values)), default=0.0)
    if not math.isfinite(largest) or largest <= 0.0:
        return 1.0, unit
    power = 3 * math.floor(math.log10(largest) / 3.0 + 1e-9)
    power = min(max(power, min(_PREFIXES)), max(_PREFIXES))
    return 10.0**-power, f"{_PREFIXES[power]}{unit}"


def log_axis(axes: Axes, side: str, unit: str) -> None:
    """Make an axis logarithmic, its ticks in engineering notation.

    Parameters
    ----------
    axes : Axes
        A panel.
    side : {"x", "y"}
        Which axis.
    unit : str
        SI unit that the data are in.
    """
    getattr(axes, f"set_{side}scale")("log")
    axis = axes.xaxis if side == "x" else axes.yaxis
    axis.set_major_formatter(lambda value, _: format_quantity(float(f"{value:.3g}"), unit))
    axis.set_minor_formatter(lambda _value, _place: "")


def name_axis(axes: Axes, side: str, name: str, unit: str) -> None:
    """Write the quantity and the unit beside an axis.

    Parameters
    ----------
    axes : Axes
        A panel.
    side : {"x", "y"}
        Which axis.
    name, unit : str
        For example ``driver current`` and ``mA``.
    """
    getattr(axes, f"set_{side}label")(f"{name} [{unit}]")


def draw_series(axes: Axes, place: int, x: Array, y: Array, label: str, **options: Any) -> Line2D:
    """Draw one of several lines; each has its colour, dashes and marker.

    Parameters
    ----------
    axes : Axes
        A panel.
    place : int
        Number of the line.
    x, y : ndarray, shape (n,)
        In the units of the axes.
    label : str
        What `label_lines` writes beside it.
    options : object
        Further properties of the line.

    Returns
    -------
    Line2D
    """
    dashes = DASHES[place % len(DASHES)]
    style: dict[str, Any] = {
        "color": COLOURS[place % len(COLOURS)],
        "linestyle": (0, dashes) if dashes else "-",
        "marker": MARKERS[place % len(MARKERS)],
        "markevery": (0.03 + 0.045 * (place % 4), 0.19),
        "markersize": 4.0,
    }
    (line,) = axes.plot(x, y, **{**style, **options})
    line.set_label(short(label))
    return line


def label_lines(axes: Axes, lines: Sequence[Line2D]) -> None:
    """Write the name of each line to the right of a panel, beside its end, with a sample of the line.

    Parameters
    ----------
    axes : Axes
        A panel whose limits are final.
    lines : sequence of Line2D
        Its lines.
    """
    figure = axes.get_figure(root=True)
    height = figure.get_figheight() if figure is not None else 3.0
    spec = axes.get_subplotspec()
    rows = 1 if spec is None else spec.get_gridspec().nrows
    gap = 0.19 / (0.72 * height / rows)
    ends = [_end(axes, line) for line in lines]
    # where lines end together, the first is named on top
    order = sorted(range(len(lines)), key=lambda k: (round(ends[k] / gap), -k))
    for k, y in zip(order, _spread([ends[k] for k in order], gap), strict=True):
        line = lines[k]
        (sample,) = axes.plot(
            [1.015, 1.045, 1.075], [y, y, y], transform=axes.transAxes, clip_on=False, scalex=False, scaley=False
        )
        sample.update_from(line)
        sample.set_transform(axes.transAxes)
        sample.set_clip_on(False)
        sample.set_markevery([1])
        sample.set_label("_sample")
        axes.text(1.09, y, str(line.get_label()), transform=axes.transAxes, va="center", color=line.get_color())


def short(text: str, longest: int = 28) -> str:
    """Cut a name that would push the panel away.

    Parameters
    ----------
    text : str
        A name.
    longest : int
        Most characters.

    Returns
    -------
    str
        The name, or its beginning and an ellipsis.
    """
    return text if len(text) <= longest else f"{text[: longest - 1]}\u2026"


def _end(axes: Axes, line: Line2D) -> float:
    """Return the height at which a line leaves the panel on the right, as a share of it."""
    x, y = (np.asarray(data, dtype=float) for data in line.get_data())
    good = np.isfinite(x) & np.isfinite(y)
    if not good.any():
        return 0.5
    at = float(np.interp(axes.get_xlim()[1], x[good], y[good]))
    spot = (axes.transScale + axes.transLimits).transform((axes.get_xlim()[1], at))
    return float(np.clip(spot[1], 0.0, 1.0))


def _spread(heights: Sequence[float], gap: float) -> list[float]:
    """Move heights, lowest first, apart by `gap` and keep them beside the panel where they fit."""
    placed: list[float] = []
    for height in heights:
        placed.append(max(height, placed[-1] + gap) if placed else height)
    top = 1.0
    for k in range(len(placed) - 1, -1, -1):
        placed[k] = min(placed[k], top)
        top = placed[k] - gap
    return placed
