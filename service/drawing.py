"""Plots as SVG, drawn by Matplotlib.

Curves are told apart by colour, by dashes or markers, and by their names
beside them, so that no reader hangs on colours. The palette is that of
M. Okabe and K. Ito, Color Universal Design, 2008 (from memory), in an order
whose neighbours also differ in lightness.
"""

from __future__ import annotations

import io
import threading
import warnings
from functools import cache
from itertools import cycle
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from schemas.page import Curve, Level, Plot

COLOURS = ("#0072b2", "#d55e00", "#009e73", "#cc79a7", "#56b4e9", "#e69f00", "#000000")
DASHES = ("-", "--", "-.", ":", (0, (6, 1, 1, 1, 1, 1)))
MARKERS = ("o", "s", "^", "D", "v", "P", "X")
WIDTH, HEIGHT = 7.2, 4.2
"""Inches, of a plot that fits an A4 page."""
MOST_NAMED = 12
"""Curves named beside the plot in one column; more take two."""
MANY = 200
"""Points of a curve from which on they are drawn small."""
TEXT = "#1b1f23"
FLAGS = "#b3261e"
LIMITS = "#8c4a00"

_ONE_AT_A_TIME = threading.Lock()
"""Matplotlib keeps state that threads share."""


@cache
def _library() -> Any:
    """Return Matplotlib, set up once; it takes most of a second to load."""
    import matplotlib
    from matplotlib.figure import Figure

    matplotlib.use("svg")
    matplotlib.rcParams.update(
        {
            "svg.fonttype": "none",  # text stays text
            "svg.hashsalt": "molwright",  # the same plot is the same bytes
            "text.parse_math": False,  # a caller's name may hold a dollar sign
            "font.family": "sans-serif",
            "font.size": 11.5,  # also read on a phone
            "axes.formatter.useoffset": False,
        }
    )
    return Figure


def svg(plot: Plot) -> str:
    """Return a plot as an SVG document."""
    with _ONE_AT_A_TIME, warnings.catch_warnings():
        # A name in a script that the font lacks is still told by the reader's own fonts.
        warnings.simplefilter("ignore")
        figure = _library()(figsize=(WIDTH, HEIGHT), layout="constrained")
        axes = figure.add_subplot()
        marks = cycle(MARKERS)
        lines = cycle(DASHES)
        handles, labels = [], []
        for colour, curve in zip(cycle(COLOURS), plot.curves, strict=False):
            style: dict[str, Any] = {"color": colour, "linewidth": 1.8}
            if curve.drawn_as == "flags":
                # A cross, so that no reader hangs on its colour.
                style |= {"color": FLAGS, "linestyle": "none", "marker": "x", "markersize": 7}
            elif curve.drawn_as == "points":
                size = 5 if len(curve.x) < MANY else 2.5
                style |= {"linestyle": "none", "marker": next(marks), "markersize": size}
            else:
                style["linestyle"] = next(lines)
                if _single(curve):
                    style |= {"marker": next(marks), "markersize": 5}
            x = _abscissae(curve, plot)
            (handle,) = axes.plot(x, _cells(curve.y), **style)
            if curve.low is not None and curve.high is not None:
                low, high = _cells(curve.low), _cells(curve.high)
                axes.fill_between(x, low, high, color=style["color"], alpha=0.18, linewidth=0)
            handles.append(handle)
            labels.append(curve.label)
        for level in plot.levels:
            handles.append(_drawn_level(axes, level))
            labels.append(level.label)
        if plot.time_zone is not None:
            _label_times(axes, plot.time_zone)
        axes.set_xlabel(_text(plot.x_label), color=TEXT)
        axes.set_ylabel(_text(plot.y_label), color=TEXT)
        axes.grid(visible=True, color="#d6dbe0", linewidth=0.6)
        axes.set_axisbelow(True)
        axes.tick_params(colors=TEXT)
        for side in ("top", "right"):
            axes.spines[side].set_visible(False)
        if len(handles) > 1:
            figure.legend(
                handles,
                [_text(label) for label in labels],
                loc="outside right upper",
                frameon=False,
                handlelength=3.2,
                ncols=1 if len(handles) <= MOST_NAMED else 2,
            )
        out = io.StringIO()
        figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    return out.getvalue()


def _drawn_level(axes: Any, level: Level) -> Any:
    """Draw a limit, and see that it is within the picture."""
    return axes.axhline(level.value, color=LIMITS, linewidth=1.2, linestyle=(0, (2, 2)))


def _abscissae(curve: Curve, plot: Plot) -> Any:
    x = np.array(_cells(curve.x))
    if plot.time_zone is None:
        return x
    # The library counts days.
    return x / 86400.0


def _label_times(axes: Any, zone: str) -> None:
    from matplotlib.dates import AutoDateLocator, ConciseDateFormatter

    known = ZoneInfo(zone)
    locator: Any = AutoDateLocator(tz=known, minticks=3, maxticks=8)  # type: ignore[no-untyped-call]
    axes.xaxis.set_major_locator(locator)
    formatter: Any = ConciseDateFormatter(locator, tz=known)  # type: ignore[no-untyped-call]
    axes.xaxis.set_major_formatter(formatter)


def _single(curve: Curve) -> bool:
    """Whether a value of the curve has no neighbour, so that a line would not show it."""
    there = [x is not None and y is not None for x, y in zip(curve.x, curve.y, strict=True)]
    padded = [False, *there, False]
    return any(padded[k] and not padded[k - 1] and not padded[k + 1] for k in range(1, len(padded)))


def _cells(values: Any) -> list[float]:
    return [float("nan") if value is None else float(value) for value in values]


def _text(words: str) -> str:
    """Return words as the library shows them: a leading underscore would hide a name."""
    return f"\u200b{words}" if words.startswith("_") else words
