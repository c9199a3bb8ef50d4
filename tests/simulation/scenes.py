"""Short scenarios, their tags as arrays, and pairs counted by brute force."""

from __future__ import annotations

import tomllib
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.scenario import Scenario, build_scenario

COHERENT = 'kind = "coherent"\nrate = "1 MHz"'
PULSED = """
kind = "pulsed-emitter"
period = "12.5 ns"
photons_per_pulse = 0.1
g2_zero = 0.1
lifetime = "1 ns"
"""


def scenario_text(
    source: str = COHERENT, detector: str = "efficiency = 1.0", more: str = "", head: str = ""
) -> str:
    """A scenario with two equal detectors (inputs 1 and 2) behind an even splitter."""
    arms = "".join(
        f'[[detector]]\ninput = {number}\nport = "{port}"\n{detector}\n'
        for number, port in ((1, "transmitted"), (2, "reflected"))
    )
    splitter = "[splitter]\ntransmittance = 0.5\nreflectance = 0.5\n"
    return f'duration = "1 s"\n{head}\n[source]\n{source}\n{splitter}{arms}{more}'


def scenario(*args: str, **kwargs: str) -> Scenario:
    """The scenario of `scenario_text`."""
    return build_scenario(tomllib.loads(scenario_text(*args, **kwargs)), "scene.toml")


def tags(scene: Scenario, seed: int, duration_ps: int) -> tuple[NDArray[np.int64], NDArray[Any]]:
    """All times and inputs of a run."""
    pieces = list(simulate_pieces(scene, seed, duration_ps))
    return (
        np.concatenate([piece.times_ps for piece in pieces]),
        np.concatenate([piece.inputs for piece in pieces]),
    )


def arms(scene: Scenario, seed: int, duration_ps: int) -> list[NDArray[np.int64]]:
    """The times of each detector, in the order of the scenario."""
    times_ps, inputs = tags(scene, seed, duration_ps)
    return [times_ps[inputs == detector.input] for detector in scene.detectors]


def lags(
    start_ps: NDArray[np.int64], stop_ps: NDArray[np.int64], from_ps: float, to_ps: float
) -> NDArray[np.int64]:
    """Every lag stop - start in [from_ps, to_ps), by listing the stops of each start."""
    first = np.searchsorted(stop_ps, start_ps + from_ps)
    count = np.searchsorted(stop_ps, start_ps + to_ps) - first
    begins = np.repeat(first - np.cumsum(count) + count, count)
    found: NDArray[np.int64] = stop_ps[begins + np.arange(count.sum())]
    return found - np.repeat(start_ps, count)


def g2_curve(
    pair: list[NDArray[np.int64]], edges_ps: NDArray[Any], duration_ps: int
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """g2 in bins between `edges_ps`, and one standard deviation of the counts in it."""
    found = lags(pair[0], pair[1], float(edges_ps[0]), float(edges_ps[-1]))
    counts = np.histogram(found, edges_ps)[0]
    pairs = pair[0].size * pair[1].size / duration_ps * np.diff(edges_ps)
    return counts / pairs, np.sqrt(np.maximum(counts, 1)) / pairs
