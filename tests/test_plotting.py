"""Pictures: one for each tally, estimate and profile; what cannot be drawn is told or left out."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.text import Text
from matplotlib.transforms import Bbox

from tagstream import plotting
from tagstream.errors import ResultsError
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.reader import Run, open_run
from tagstream.outputs.run_writer import RunWriter
from tagstream.plotting import CLOSE_BINS, MANY_BINS, draw_g2, draw_history, plot_run
from tests.fakes_outputs import (
    make_estimate,
    make_header,
    make_profile,
    make_row,
    make_snapshot,
    make_tally,
)

PNG = b"\x89PNG\r\n\x1a\n"


def make_run(folder: Path, bins: int = 11, rows: int = 3) -> Run:
    writer = RunWriter(RunFolder.create(folder, "run"), make_header())
    for index in range(rows):
        writer.add_row(make_row(index))
    writer.close(make_snapshot(rows, bins))
    return open_run(writer.folder.path)


@pytest.mark.parametrize("bins", [11, MANY_BINS + 1], ids=["few", "many"])
def test_every_tally_estimate_and_profile_has_its_pictures(tmp_path: Path, bins: int) -> None:
    paths = plot_run(make_run(tmp_path, bins), tmp_path / "made/pictures")
    names = ["hbt", "g2_zero", "g2_zero_peaks", "rate_a"]
    expected = [f"{name}.{extension}" for name in names for extension in ("png", "svg")]
    assert [path.name for path in paths] == expected
    assert {path.parent for path in paths} == {tmp_path / "made/pictures"}
    for path in paths:
        content = path.read_bytes()
        assert content.startswith(PNG) if path.suffix == ".png" else b"</svg>" in content
        assert len(content) > 5000


def test_the_same_run_gives_the_same_pictures_and_leaves_no_style_behind(tmp_path: Path) -> None:
    run, before = make_run(tmp_path), dict(mpl.rcParams)
    first = [path.read_bytes() for path in plot_run(run, tmp_path / "a")]
    second = [path.read_bytes() for path in plot_run(run, tmp_path / "b")]
    assert first == second
    assert dict(mpl.rcParams) == before


def test_only_the_formats_that_are_asked_for(tmp_path: Path) -> None:
    plot_run(make_run(tmp_path), tmp_path / "pictures", ["svg"])
    assert {path.suffix for path in (tmp_path / "pictures").iterdir()} == {".svg"}


def test_before_the_first_slice_there_is_nothing_to_draw(tmp_path: Path) -> None:
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    assert plot_run(open_run(tmp_path / "run"), tmp_path / "pictures") == []
    writer.close(make_snapshot())


def tally(bins: int) -> dict[str, Any]:
    return {**make_tally(bins), "live_time_s": np.float64(1.0)}


def test_few_bins_are_points_at_their_lag_with_their_intervals() -> None:
    figure, arrays = Figure(), tally(11)
    draw_g2(figure, arrays, "hbt")
    (axes,) = figure.axes
    points = axes.lines[0]
    assert axes.get_xlabel() == "lag, stop − start (ps)"
    assert np.array_equal(points.get_xdata(), arrays["lag"])
    assert np.array_equal(points.get_ydata(), arrays["g2"])
    bars = np.array([np.asarray(p.vertices)[:, 1] for p in axes.collections[0].get_paths()])
    assert np.array_equal(bars, np.column_stack([arrays["g2_lower"], arrays["g2_upper"]]))
    assert axes.get_ylim()[0] == 0
    assert figure.get_suptitle() == "hbt; bars: 68.27 % intervals"


def test_no_title_is_cut_off(tmp_path: Path) -> None:
    """At the sizes that are saved, with the longest name that settings allow."""
    name = "a" * 31
    with mpl.rc_context(plotting.STYLE):
        figures = [Figure() for _ in range(4)]
        draw_g2(figures[0], tally(11), f"{name}, 12.34 s of live time")
        draw_g2(figures[1], tally(2001), f"{name}, 12.34 s of live time")
        draw_history(figures[2], rows(5), name, "10 s", make_estimate())
        left, right = figures[3].subplots(1, 2, width_ratios=(3, 2))
        plotting.draw_peaks(left, make_profile(), name)
        plotting.draw_window_scan(right, make_profile(), name)
        for figure in figures:
            figure.savefig(tmp_path / "picture.png")
            frame = figure.bbox.padded(1)
            ticks = [t for a in figure.axes for t in a.get_xticklabels() + a.get_yticklabels()]
            texts = [t for t in figure.findobj(Text) if t.get_text() and t not in ticks]
            boxes = [text.get_window_extent() for text in texts]
            outside = [t for t, b in zip(texts, boxes, strict=True) if not within(b, frame)]
            assert not outside


def within(inner: Bbox, outer: Bbox) -> bool:
    across = outer.x0 <= inner.x0 and inner.x1 <= outer.x1
    return bool(across and outer.y0 <= inner.y0 and inner.y1 <= outer.y1)


def test_of_many_bins_those_around_zero_lag_are_drawn_apart() -> None:
    figure, arrays = Figure(), tally(2001)
    draw_g2(figure, arrays, "hbt")
    whole, close = figure.axes
    assert whole.get_xlabel() == "lag, stop − start (ns)"
    assert np.size(whole.lines[0].get_xdata()) == 2001
    near = np.asarray(close.lines[0].get_xdata())
    assert near.size == 2 * CLOSE_BINS + 1
    assert near[CLOSE_BINS] == 0
    assert whole.get_ylabel() == close.get_ylabel() != ""


def rows(count: int) -> dict[str, Any]:
    begin_ps = np.arange(count) * 10**12
    value = np.linspace(0.1, 0.2, count)
    return {
        "begin_ps": begin_ps,
        "end_ps": begin_ps + 10**12,
        "time_s": np.arange(1.0, count + 1),
        "value": value,
        "lower": value - 0.01,
        "upper": value + 0.01,
    }


def test_a_history_without_holes_is_one_line() -> None:
    figure = Figure()
    draw_history(figure, rows(5), "g2_zero", "10 s", make_estimate())
    (axes,) = figure.axes
    assert np.array_equal(axes.lines[0].get_ydata(), rows(5)["value"])
    assert figure.get_supylabel() == "g2_zero"


def test_a_history_is_not_joined_across_slices_that_are_missing() -> None:
    full = rows(6)
    holed = {name: values[[0, 1, 4, 5]] for name, values in full.items()}
    figure = Figure()
    draw_history(figure, holed, "rate_a", "run", make_estimate(unit="Hz"))
    drawn = figure.axes[0].lines[0].get_ydata()
    assert np.isnan(drawn).tolist() == [False, False, True, False, False]
    assert figure.get_supylabel() == "rate_a (Hz)"


@pytest.mark.parametrize("count", [0, 1, 100])
def test_histories_of_any_length_and_without_numbers_can_be_drawn(count: int) -> None:
    for value in (0.1, np.nan):
        figure = Figure()
        made = {**rows(count), "value": np.full(count, value)}
        draw_history(figure, made, "g2_zero", "run", make_estimate())
        figure.draw_without_rendering()


def test_a_run_whose_estimate_has_no_number_yet_can_be_drawn(tmp_path: Path) -> None:
    snapshot = make_snapshot()
    nothing = np.full(7, np.nan)
    none = make_estimate(
        value=np.nan,
        lower=np.nan,
        upper=np.nan,
        interval="none",
        profile={**make_profile(), "peak_area": nothing, "peak_area_upper": nothing},
    )
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    writer.add_row(make_row(0))
    writer.close(replace(snapshot, estimates={**snapshot.estimates, "g2_zero": (none, none)}))
    names = {path.name for path in plot_run(open_run(tmp_path / "run"), tmp_path, ["png"])}
    assert names == {"hbt.png", "g2_zero.png", "g2_zero_peaks.png", "rate_a.png"}


def test_without_matplotlib_it_says_what_to_install(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = make_run(tmp_path)
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    with pytest.raises(ResultsError, match=r"pip install 'tagstream\[pictures\]'"):
        plot_run(run, tmp_path / "pictures")
    assert not (tmp_path / "pictures").exists()


def test_a_file_in_place_of_the_folder_is_told(tmp_path: Path) -> None:
    run = make_run(tmp_path)
    (tmp_path / "pictures").write_text("")
    with pytest.raises(ResultsError, match=r"pictures cannot be written.*--output") as caught:
        plot_run(run, tmp_path / "pictures")
    assert str(tmp_path / "pictures") in str(caught.value)


def test_a_folder_that_cannot_be_written_is_told(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = make_run(tmp_path)

    def fail(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Figure, "savefig", fail)
    with pytest.raises(ResultsError, match="Permission denied"):
        plot_run(run, tmp_path / "pictures")


@pytest.mark.parametrize(
    ("largest_ps", "unit"), [(5.0, "ps"), (1999.0, "ps"), (2000.0, "ns"), (5e6, "µs"), (3e12, "s")]
)
def test_times_are_shown_in_a_unit_of_few_digits(largest_ps: float, unit: str) -> None:
    assert plotting._scale(largest_ps)[1] == unit
