"""Photon pairs that meet at a splitter, while a stage moves from one mark to the next."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Annotated, Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.recording.layout import Mark
from tagstream.settings.quantities import PositiveTimePs
from tagstream.simulation.behind_splitter import Outputs
from tagstream.simulation.dip_shapes import SHAPES
from tagstream.simulation.draws import no_photons
from tagstream.simulation.jitter import lag_share
from tagstream.simulation.light import Arm, Light, Photons, Source, joint_sigma_ps
from tagstream.simulation.meeting import bunched, bunching_chance
from tagstream.simulation.quantities import RateHz
from tagstream.simulation.two_pulses import Overlap
from tagstream.units import PS_PER_S

KEY = "position"
Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[float, Field(gt=0, strict=True, allow_inf_nan=False)]


class DipScan(Source):
    """Pairs at independent instants, one photon in each input of the splitter, as if at one time.

    At position x their overlap is `overlap` times the shape of the dip. Both photons are coupled
    in with 1 + coupling_slope (x - centre), relative to its highest value in the scan: singles
    follow it, coincidences its square, and neither is interference. The scan begins anew
    after its last point.
    """

    kind: Literal["dip-scan"]
    rate_hz: RateHz = Field(alias="rate")  # of pairs, where the coupling is best
    shape: Literal["gaussian", "triangular", "sinc", "exponential"]
    overlap: Overlap  # at the centre
    centre: Number
    width: Positive  # full width at half depth
    first: Number = Field(alias="from")
    last: Number = Field(alias="to")
    points: Annotated[int, Field(ge=2, le=10_000, strict=True)]
    dwell_ps: PositiveTimePs = Field(alias="dwell")
    coupling_slope: Number = 0.0

    @model_validator(mode="after")
    def _check(self) -> DipScan:
        if self.first == self.last:
            raise ValueError("`from` and `to` apart from each other")
        if self._raw_couplings.min() <= 0:
            raise ValueError(
                "`coupling_slope` that leaves light at each position from `from` to `to`"
            )
        return self

    @property
    def positions(self) -> NDArray[np.float64]:
        """In the order of the scan."""
        return np.linspace(self.first, self.last, self.points)

    @property
    def _raw_couplings(self) -> NDArray[np.float64]:
        return 1 + self.coupling_slope * (self.positions - self.centre)

    @property
    def couplings(self) -> NDArray[np.float64]:
        """Of each photon at each position; the highest is 1."""
        raw = self._raw_couplings
        relative: NDArray[np.float64] = raw / raw.max()
        return relative

    @property
    def overlaps(self) -> NDArray[np.float64]:
        """At each position."""
        return self.overlap * SHAPES[self.shape]((self.positions - self.centre) / self.width)

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second in both inputs, over the scan."""
        return 2 * self.rate_hz * float(self.couplings.mean())

    @property
    def memory_ps(self) -> float:
        """None."""
        return 0.0

    @property
    def light_g2_zero(self) -> None:
        """That of one input is 1, that of pairs depends on the window."""

    @property
    def default_window_ps(self) -> float:
        """1 ns."""
        return 1_000.0

    def seen_by(self, arms: Sequence[Arm]) -> tuple[Arm, ...]:
        """Half of all photons come by each input, and leave by this output with T or with R."""
        return tuple(
            replace(arm, share=(arm.split + arm.beside) / 2 * arm.efficiency) for arm in arms
        )

    def places(self, times_ps: NDArray[np.float64], begin_ps: int) -> NDArray[np.int64]:
        """Which position it is at times after `begin_ps`."""
        cycle = self.dwell_ps * self.points
        since = times_ps + begin_ps % cycle
        return (since // self.dwell_ps).astype(np.int64) % self.points

    def marks(self, begin_ps: int, end_ps: int) -> tuple[Mark, ...]:
        """Each position as the stage comes to it."""
        positions = self.positions.tolist()
        steps = range(-(-begin_ps // self.dwell_ps), -(-end_ps // self.dwell_ps))
        return tuple(Mark(n * self.dwell_ps, KEY, positions[n % self.points]) for n in steps)

    def g2_measured(
        self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int] = (1, 8)
    ) -> float:
        """Coincidences in the window over accidentals, at the mean position.

        Raises ValueError for a window of zero: the photons of a pair come at one time.
        """
        if window_ps <= 0:
            raise ValueError("a window longer than zero")
        coincidences = self._pairs_hz(a, b, window_ps) * _apart(a, self.overlaps)
        accidentals = self._singles_hz(a) * self._singles_hz(b) * window_ps / PS_PER_S
        if accidentals.max() == 0:
            return 1.0
        return 1 + float(coincidences.sum() / accidentals.sum())

    def _pairs_hz(self, a: Arm, b: Arm, window_ps: float) -> NDArray[np.float64]:
        """Of which both photons are detected if they leave as they must, at each position."""
        near = float(lag_share(0.0, window_ps, 0.0, joint_sigma_ps(a, b)))
        return self.rate_hz * near * a.efficiency * b.efficiency * self.couplings**2

    def _singles_hz(self, arm: Arm) -> NDArray[np.float64]:
        return 2 * self.rate_hz * arm.share * self.couplings + arm.dark_rate_hz

    def registered_rate_hz(self, arm: Arm) -> float:
        """The non-paralyzable formula, where two photons in one output make one count.

        The mean over the positions, R T (1 + V) of the pairs being in this output.
        """
        singles = self._singles_hz(arm)
        if arm.dead_time_ps > 0:
            both = arm.split * arm.beside * (1 + self.overlaps)
            singles = singles - self.rate_hz * (arm.efficiency * self.couplings) ** 2 * both
        return float(np.mean(singles / (1 + singles * arm.dead_time_ps / PS_PER_S)))

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """dip_centre, dip_width: of the key shape. hom_visibility: depth of the dip over its rim.

        Of coincidences in the window, accidentals included; hom_visibility_light: 2 R T / (R^2 +
        T^2) times the overlap, without them. indistinguishability: the overlap at the centre.
        """
        known = {"indistinguishability": self.overlap}
        known |= {"dip_centre": self.centre, "dip_width": self.width}
        if len(arms) != 2 or min(arm.share for arm in arms) == 0:
            return known
        a, b = arms
        depth = bunching_chance(a.split, a.beside) * self.overlap
        rim = self._pairs_hz(a, b, window_ps).max() * (a.split**2 + a.beside**2)
        accidentals = (self._singles_hz(a) * self._singles_hz(b)).max() * window_ps / PS_PER_S
        known["hom_visibility_light"] = depth
        known["hom_visibility"] = depth * float(rim / (rim + accidentals))
        return known

    def light(self, arms: Sequence[Arm]) -> Light:
        """The photons that leave the splitter."""
        return _DipLight(self, arms)


def _apart(arm: Arm, overlaps: NDArray[Any]) -> NDArray[np.float64]:
    """The part of the pairs that leaves by both outputs, losses of the splitter included."""
    r, t = arm.split, arm.beside
    left: NDArray[np.float64] = r**2 + t**2 - 2 * r * t * overlaps
    return left


class _DipLight:
    def __init__(self, source: DipScan, arms: Sequence[Arm]) -> None:
        self._source, self._outputs = source, Outputs(arms)
        self._couplings, self._overlaps = source.couplings, source.overlaps
        self._share = self._outputs.common
        r = self._outputs.reflected
        self._chance = bunching_chance(r, 1 - r)

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        per_ps = self._source.rate_hz * self._share / PS_PER_S
        if per_ps == 0:
            return no_photons()
        both = int(rng.poisson(per_ps * self._share * length_ps))
        single = int(rng.poisson(2 * per_ps * (1 - self._share) * length_ps))
        pairs = rng.random(both) * length_ps
        offsets = np.concatenate((pairs, pairs, rng.random(single) * length_ps))
        places = self._source.places(offsets, begin_ps)
        inputs = np.repeat(np.array([0, 1, 0], np.uint8), (both, both, single))
        inputs[2 * both :] = rng.random(single) < 0.5
        reflected = rng.random(offsets.size) < self._outputs.reflected
        meets = np.arange(2 * both).reshape(2, both)
        chances = self._chance * self._overlaps[places[:both]]
        reflected = bunched(reflected, meets, chances, rng)
        coupled = rng.random(offsets.size) < self._couplings[places]
        outputs = (inputs ^ reflected).astype(np.uint8)
        return self._outputs.detected(offsets[coupled], outputs[coupled], rng)
