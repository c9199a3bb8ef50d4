from __future__ import annotations

import numpy as np
import pytest

from tagstream.recording.layout import Mark
from tagstream.simulation.dip_scan import DipScan
from tagstream.simulation.dip_shapes import SHAPES
from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, lags, scenario

S = 10**12
DWELL = S // 20
SOURCE = """
kind = "dip-scan"
rate = "1 MHz"
shape = "triangular"
overlap = 0.9
centre = 0.5
width = 2.0
from = -4.5
to = 5.5
points = 11
dwell = "50 ms"
coupling_slope = -0.05
"""
DETECTOR = 'efficiency = 0.5\njitter_fwhm = "200 ps"\ndark_rate = "20 kHz"'


@pytest.mark.parametrize("name", SHAPES)
def test_shapes_are_one_at_the_centre_and_half_at_half_a_width(name: str) -> None:
    shape = SHAPES[name]
    np.testing.assert_allclose(shape(np.array([0.0, 0.5, -0.5])), [1, 0.5, 0.5])
    assert abs(shape(np.array([50.0]))[0]) < 0.006


def test_a_rectangular_filter_has_lobes_that_raise_the_rim() -> None:
    # sin(u) / u is lowest, -0.21723, at u = 4.49341 (textbook)
    assert SHAPES["sinc"](np.array([4.49341 / 1.895494 / 2]))[0] == pytest.approx(
        -0.21723, abs=1e-5
    )


def test_coincidences_at_each_position() -> None:
    scene = scenario(SOURCE, DETECTOR, '[truth]\nwindow = "1 ns"\n')
    source = scene.source
    assert isinstance(source, DipScan)
    start, stop = arms(scene, 1, 11 * DWELL)
    found = np.array(
        [
            lags(start[start // DWELL == n], stop[stop // DWELL == n], -500, 500).size
            for n in range(11)
        ]
    )
    coupling = 1 - 0.05 * (np.linspace(-4.5, 5.5, 11) - 0.5)
    coupling /= coupling[0]
    dip = np.maximum(1 - np.abs(np.linspace(-5, 5, 11)) / 2, 0)
    pairs = 1e6 * 0.25 * coupling**2 * (1 - 0.9 * dip) / 2  # the window holds all of a pair
    singles = 1e6 * 0.5 * coupling + 20e3
    expected = (pairs + singles**2 * 1e-9) / 20
    assert np.sum((found - expected) ** 2 / expected) < 33  # chi-square of eleven
    known = truth(scene)
    by_rim = 1 - expected[5] / (expected / coupling**2)[0] / coupling[5] ** 2
    assert known["hom_visibility"] == pytest.approx(by_rim, abs=2e-3)
    assert known["hom_visibility_light"] == pytest.approx(0.9)
    ratio = found.sum() / (start.size * stop.size * 1000 / (11 * DWELL))
    assert known["g2_zero_measured"] == pytest.approx(ratio, rel=0.06)  # accidentals drift too
    assert (known["dip_centre"], known["dip_width"]) == (0.5, 2.0)


@pytest.mark.parametrize("dead", ["0 ns", "40 ns"])
def test_rates(dead: str) -> None:
    scene = scenario(SOURCE, f'efficiency = 0.5\ndead_time = "{dead}"')
    known = truth(scene)
    for times, number in zip(arms(scene, 2, 11 * DWELL), (1, 2), strict=True):
        expected = known[f"rate_input_{number}_hz"] * 0.55
        # without dead time a bunched pair is two tags: the variance is above Poisson
        assert times.size == pytest.approx(expected, abs=5 * np.sqrt(expected))


def test_marks_follow_the_stage_and_begin_anew() -> None:
    scene = scenario(SOURCE, DETECTOR)
    pieces = list(simulate_pieces(scene, 1, 13 * DWELL))
    found = [mark for piece in pieces for mark in piece.marks]
    positions = [*np.linspace(-4.5, 5.5, 11).tolist(), -4.5, -3.5]
    assert found == [Mark(n * DWELL, "position", x) for n, x in enumerate(positions)]


def test_positions_after_days_are_exact() -> None:
    source = scenario(SOURCE).source
    assert isinstance(source, DipScan)
    begin = 100 * 86_400 * S + 3 * DWELL - 5
    since = begin // DWELL  # position number 2 or 3 of some scan
    places = source.places(np.array([0.0, 4.0, 5.0]), begin)
    assert places.tolist() == [since % 11, since % 11, (since + 1) % 11]


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("-0.05", "-0.3", "coupling_slope"),
        ("to = 5.5", "to = -4.5", "`from` and `to` apart"),
        ("points = 11", "points = 1", "points"),
        ("triangular", "square", "shape"),
        ("width = 2.0", "width = 0.0", "width"),
    ],
)
def test_scans_that_cannot_be(old: str, new: str, message: str) -> None:
    with pytest.raises(Exception, match=message):
        scenario(SOURCE.replace(old, new))
