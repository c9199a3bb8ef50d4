"""Pictures of a run: histograms with error bars, peak areas, histories.

One figure style, readable in black and white: open circles for measured points, thin grey bars
for their intervals, black lines, nothing told by colour alone.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import ResultsError
from tagstream.estimates import Estimate
from tagstream.outputs.reader import Run
from tagstream.settings.measures import DEFAULT_LEVEL

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

STYLE: dict[Any, Any] = {
    "figure.figsize": (7.2, 4.0),
    "figure.dpi": 150,
    "figure.constrained_layout.use": True,
    "font.family": "sans-serif",
    "font.size": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.linewidth": 0.8,
    "axes.titlesize": 9,
    "axes.titlelocation": "left",
    "lines.linewidth": 0.9,
    "lines.markersize": 3.2,
    "xtick.direction": "out",
    "ytick.direction": "out",
    "legend.frameon": False,
    "svg.hashsalt": "tagstream",
}
INK, BAR, BAND = "black", "0.55", "0.85"
MANY_BINS = 400  # beyond this, points would hide each other
CLOSE_BINS = 60  # shown on each side of zero lag then
FEW_ROWS = 60  # of a history: drawn as points
G2 = r"$g^{(2)}$"
SCALES = ((1e12, "s"), (1e9, "ms"), (1e6, "µs"), (1e3, "ns"), (1.0, "ps"))


def plot_run(run: Run, folder: Path, formats: Sequence[str] = ("png", "svg")) -> list[Path]:
    """Write the pictures of `run` into `folder`; return their paths.

    <tally>.<format>: g2 against lag over the run. <estimate>.<format>: its course over the run.
    <estimate>_peaks.<format>: peak areas, and the estimate against the width of its window,
    where it keeps them. Raises ResultsError when matplotlib is missing or nothing can be written.
    """
    try:
        import matplotlib as mpl
        from matplotlib.figure import Figure
    except ImportError as error:
        raise ResultsError(
            "pictures need matplotlib, which is not installed: pip install 'tagstream[pictures]'"
        ) from error
    paths = []
    with mpl.rc_context(STYLE):
        for name, figure in _figures(run, Figure):
            paths += _save(figure, folder, name, formats)
    return paths


def _figures(run: Run, new: type[Figure]) -> Iterator[tuple[str, Figure]]:
    for name, spans in run.tallies.items():
        figure = new()
        draw_g2(figure, spans["run"], f"{name}, {_length(spans['run'])}")
        yield name, figure
    for name, estimates in run.estimates.items():
        figure = new()
        for span in list(estimates)[:2]:
            draw_history(figure, run.history(name, span), name, span, estimates[span])
        if figure.axes:  # else no slice has ended yet
            yield name, figure
        profile = run.profile(name)
        if "peak_number" in profile:
            figure = new()
            left, right = figure.subplots(1, 2, width_ratios=(3, 2))
            draw_peaks(left, profile, name)
            draw_window_scan(right, profile, name)
            yield f"{name}_peaks", figure


def draw_g2(figure: Figure, arrays: Mapping[str, NDArray[Any]], title: str) -> None:
    """g2 against lag; of many bins the whole as a line, and those around zero with intervals."""
    bins = arrays["lag"].size
    if bins <= MANY_BINS:
        axes = figure.subplots()
        _g2_points(axes, arrays, slice(None))
    else:
        axes, close = figure.subplots(1, 2, width_ratios=(3, 2))
        scale, unit = _scale(float(np.abs(arrays["lag"]).max()))
        axes.step(arrays["lag"] / scale, arrays["g2"], where="mid", color=INK, linewidth=0.6)
        axes.set_xlabel(f"lag, stop − start ({unit})")
        axes.set_ylabel(G2)
        axes.set_ylim(bottom=0)
        _g2_points(close, arrays, slice(bins // 2 - CLOSE_BINS, bins // 2 + CLOSE_BINS + 1))
        close.set_title("around zero lag")
    axes.margins(x=0.01)
    axes.axhline(1, color=BAR, linestyle=":", zorder=0)
    text = f"{title}; bars: {_percent(DEFAULT_LEVEL)} intervals"
    figure.suptitle(text, x=0.01, horizontalalignment="left", fontsize=STYLE["axes.titlesize"])


def _g2_points(axes: Axes, arrays: Mapping[str, NDArray[Any]], bins: slice) -> None:
    scale, unit = _scale(float(np.abs(arrays["lag"][bins]).max()))
    columns = (arrays[name][bins] for name in ("g2", "g2_lower", "g2_upper"))
    _points(axes, arrays["lag"][bins] / scale, *columns)
    axes.set_xlabel(f"lag, stop − start ({unit})")
    axes.set_ylabel(G2)
    axes.set_ylim(bottom=0)


def draw_history(
    figure: Figure, rows: Mapping[str, NDArray[Any]], name: str, span: str, found: Estimate
) -> None:
    """An estimate over stream time: the value and the band of its interval.

    Slices without a number, and stretches without slices, leave a hole.
    """
    count = len(figure.axes) + 1
    axes = figure.add_subplot(2, 1, count, sharex=figure.axes[0] if figure.axes else None)
    holes = np.flatnonzero(rows["begin_ps"][1:] != rows["end_ps"][:-1]) + 1
    time_s = np.insert(rows["time_s"], holes, rows["time_s"][holes])
    value, lower, upper = (
        np.insert(rows[column], holes, np.nan) for column in ("value", "lower", "upper")
    )
    axes.fill_between(time_s, lower, upper, color=BAND, linewidth=0)
    few = "o" if time_s.size <= FEW_ROWS else None
    axes.plot(time_s, value, color=INK, marker=few, markerfacecolor="white")
    if few:  # a lone point has no band to be seen
        axes.vlines(time_s, lower, upper, color=BAR, linewidth=0.9, zorder=1)
    label = name if found.unit == "1" else f"{name} ({found.unit})"
    figure.supylabel(label, fontsize=STYLE["font.size"])
    over = "the run so far" if span == "run" else f"the last {span}"
    axes.set_title(f"over {over}; band: {_percent(found.level)} interval")
    axes.set_xlabel("stream time (s)")
    axes.label_outer()


def draw_peaks(axes: Axes, profile: Mapping[str, NDArray[Any]], name: str) -> None:
    """Peak areas against peak number, relative to the side peaks used."""
    number, area = profile["peak_number"], profile["peak_area"]
    _points(axes, number, area, profile["peak_area_lower"], profile["peak_area_upper"])
    axes.axhline(1, color=BAR, linestyle=":", zorder=0)
    axes.set_xlabel("peak number")
    axes.set_ylabel("area / mean of side peaks used")
    axes.set_ylim(bottom=0)
    axes.set_title(f"{name}: peak areas")


def draw_window_scan(axes: Axes, profile: Mapping[str, NDArray[Any]], name: str) -> None:
    """The estimate against the width of its window: flat when peaks are alike and apart.

    Wider windows hold the counts of the narrower ones, so neighbouring points move together.
    """
    scale, unit = _scale(float(profile["window_width_ps"].max()))
    width, value = profile["window_width_ps"] / scale, profile["window_value"]
    _points(axes, width, value, profile["window_lower"], profile["window_upper"])
    axes.set_xlabel(f"width of window ({unit})")
    axes.set_ylabel(name)
    axes.set_ylim(bottom=0)
    axes.set_title("against window")


def _points(
    axes: Axes,
    x: NDArray[Any],
    y: NDArray[Any],
    lower: NDArray[Any],
    upper: NDArray[Any],
) -> None:
    axes.vlines(x, lower, upper, color=BAR, linewidth=0.9)
    axes.plot(x, y, "o", color=INK, markerfacecolor="white", markeredgewidth=0.7, clip_on=False)


def _save(figure: Figure, folder: Path, name: str, formats: Sequence[str]) -> list[Path]:
    paths = [folder / f"{name}.{extension}" for extension in formats]
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for path in paths:
            figure.savefig(path, metadata={"Date": None} if path.suffix == ".svg" else None)
    except OSError as error:
        raise ResultsError(
            f"{folder}: pictures cannot be written: {error.strerror or error}; choose another"
            " --output"
        ) from error
    return paths


def _scale(largest_ps: float) -> tuple[float, str]:
    """The unit in which a time is a number of few digits."""
    return next((s for s in SCALES if largest_ps >= 2 * s[0]), SCALES[-1])


def _percent(level: float) -> str:
    return f"{100 * level:.4g} %"


def _length(arrays: Mapping[str, NDArray[Any]]) -> str:
    return f"{float(arrays['live_time_s']):.4g} s of live time"
