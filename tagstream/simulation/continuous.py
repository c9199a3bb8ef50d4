"""What all continuous light has in common: measured g2 and rates from its correlation alone."""

from __future__ import annotations

from abc import abstractmethod
from math import sqrt

from tagstream.simulation.light import Arm, Source, joint_sigma_ps
from tagstream.units import PS_PER_S


class ContinuousSource(Source):
    """Continuous-wave light."""

    @abstractmethod
    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Mean of g2 - 1 of the light over a centred window, its lags blurred by that sigma.

        A window of zero means the value at zero lag.
        """

    @property
    def light_g2_zero(self) -> float:
        """g2(0) of the light at the splitter."""
        return 1 + self.mean_excess(0, 0)

    @property
    def default_window_ps(self) -> float:
        """Zero: a bin that is narrow beside all else."""
        return 0.0

    def g2_measured(
        self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int] = (1, 8)
    ) -> float:
        """g2 between two arms, averaged over a centred window; 0 is the limit of a narrow one.

        1 + f_a f_b (g2 - 1): dark counts are independent of all else (the background formula
        of Brouri et al., Opt. Lett. 25, 1294 (2000), with one fraction for each arm).
        """
        fractions = a.light_fraction(self.photon_rate_hz) * b.light_fraction(self.photon_rate_hz)
        return 1 + fractions * self.mean_excess(window_ps, joint_sigma_ps(a, b))

    def registered_rate_hz(self, arm: Arm) -> float:
        """r / (1 + M): M counts are expected in the dead time after a count.

        M = r x integral of the arm's own g2 over the dead time. Exact where the counts are a
        renewal process (Wald's identity); for coherent light M = r tau, the non-paralyzable
        formula (Knoll, Radiation Detection and Measurement, ch. 4). With dark counts on
        correlated light right to first order in M.
        """
        rate = self.photon_rate_hz * arm.share + arm.dark_rate_hz
        fraction = arm.light_fraction(self.photon_rate_hz)
        excess = self.mean_excess(2 * arm.dead_time_ps, sqrt(2) * arm.jitter_sigma_ps)
        later = rate * arm.dead_time_ps / PS_PER_S * (1 + fraction**2 * excess)
        return rate / (1 + later)
