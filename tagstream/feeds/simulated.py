"""Simulated tags and marks as a feed, with the truth about them."""

from __future__ import annotations

from collections.abc import Generator
from typing import Any

from tagstream.feeds import Arrivals, TimeBase
from tagstream.settings import feeds as sections
from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.scenario import load_scenario
from tagstream.simulation.truth import truth


class SimulationFeed:
    """Tags of a scenario from stream time zero on; every piece is vouched for.

    Raises SettingsError when the scenario cannot be read or is wrong.
    """

    def __init__(self, settings: sections.SimulationFeed, slice_ps: int) -> None:
        self._scenario = load_scenario(settings.scenario)
        self._seed = settings.seed
        self._duration_ps = settings.duration_ps or self._scenario.duration_ps
        self._done_ps = 0

    def pieces(self) -> Generator[Arrivals]:
        """Contiguous pieces in time order, from 0 to the duration exactly."""
        for piece in simulate_pieces(self._scenario, self._seed, self._duration_ps):
            self._done_ps = piece.end_ps
            yield Arrivals(
                piece.times_ps, piece.inputs, piece.begin_ps, piece.end_ps, marks=piece.marks
            )

    @property
    def time_base(self) -> TimeBase:
        """The tick of the scenario; times count from zero, so no slice moves the origin."""
        return TimeBase(self._scenario.tick_ps)

    @property
    def truth(self) -> dict[str, Any]:
        """What a right analysis finds (simulation.truth), and the seed."""
        return {**truth(self._scenario, self._duration_ps), "seed": self._seed}

    @property
    def progress(self) -> float:
        """The fraction of the duration handed on."""
        return self._done_ps / self._duration_ps
