from __future__ import annotations

from math import exp, pi, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from tagstream.simulation.jitter import FWHM_PER_SIGMA, lag_cdf, lag_share, mean_decay


def folded_density(x: float, scale: float, sigma: float) -> float:
    """Two-sided exponential folded with a normal law, by numerical integration."""

    def integrand(u: float) -> float:
        normal = exp(-0.5 * ((x - u) / sigma) ** 2) / (sigma * sqrt(2 * pi))
        return normal * exp(-abs(u) / scale) / (2 * scale)

    return sum(
        float(quad(integrand, a, b, epsabs=1e-12)[0])
        for a, b in (
            (x - 12 * sigma, min(0.0, x + 12 * sigma)),
            (max(0.0, x - 12 * sigma), x + 12 * sigma),
        )
        if a < b
    )


# 1 - exp(s^2/2) erfc(s/sqrt 2), the dip of a two-level emitter filled by jitter; calculated
# independently for the project's table of check values.
@pytest.mark.parametrize(
    ("sigma", "g2"), [(0.1, 0.0750424), (0.5, 0.3007623), (1.0, 0.4768434), (0.0, 0.0)]
)
def test_jitter_fills_the_dip_as_published(sigma: float, g2: float) -> None:
    assert 1 - mean_decay(0, 1, sigma) == pytest.approx(g2, abs=5e-8)
    assert 1 - mean_decay(1e-3, 7000, 7000 * sigma) == pytest.approx(g2, abs=1e-6)


def test_fwhm_of_a_normal_law() -> None:
    # NIST IR 8486r1 and any textbook: FWHM = 2.354820 sigma
    assert abs(FWHM_PER_SIGMA - 2.354820) < 1e-6


@pytest.mark.parametrize("scale", [0.3, 1.0, 4.0])
@pytest.mark.parametrize("sigma", [0.4, 1.5])
@pytest.mark.parametrize("centre", [0.0, 0.7, -2.0, 6.0])
def test_share_of_a_window_equals_the_integral(scale: float, sigma: float, centre: float) -> None:
    expected = quad(folded_density, centre - 0.5, centre + 0.5, (scale, sigma), epsabs=1e-11)[0]
    assert float(lag_share(centre, 1.0, scale, sigma)) == pytest.approx(expected, rel=1e-7)


@given(st.floats(1e-2, 1e4), st.floats(1e-2, 1e4), st.floats(-1e6, 1e6))
def test_cdf_is_symmetric_and_bounded(scale: float, sigma: float, x: float) -> None:
    low, high = lag_cdf(np.array([-x, x]), scale, sigma)
    assert low + high == pytest.approx(1, abs=1e-9)
    assert -1e-9 <= low <= 1 + 1e-9


def test_without_jitter_or_without_lifetime() -> None:
    assert float(lag_cdf(2.0, 2.0, 0.0)) == pytest.approx(1 - exp(-1) / 2)
    assert float(lag_cdf(-2.0, 2.0, 0.0)) == pytest.approx(exp(-1) / 2)
    assert float(lag_cdf(1.0, 0.0, 1.0)) == pytest.approx(0.8413447460685429)  # Phi(1)
    assert lag_cdf([-1.0, 0.0, 1.0], 0.0, 0.0).tolist() == [0, 0.5, 1]


def test_mean_decay_over_a_wide_window() -> None:
    # without jitter: (1 - exp(-w / 2b)) 2b / w
    assert mean_decay(3.0, 2.0, 0.0) == pytest.approx((1 - exp(-0.75)) / 0.75)
    assert mean_decay(3.0, 2.0, 1e-9) == pytest.approx((1 - exp(-0.75)) / 0.75)
