"""Intervals against published tables, other libraries and their own promises."""

from __future__ import annotations

from math import exp, inf, isclose, log

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from tagstream.estimates.intervals import (
    Kind,
    binomial_interval,
    garwood,
    poisson_interval,
    ratio_interval,
    ratio_p_value,
)

ONE_SIGMA = 2 * stats.norm.cdf(1) - 1  # two-sided level whose bounds are one-sided Phi(1)
TWO_SIGMA = 2 * stats.norm.cdf(2) - 1
LEVELS = st.sampled_from([0.5, 0.6827, 0.95])


@pytest.mark.parametrize(
    ("count", "lower", "upper"),
    # Gehrels, ApJ 303, 336 (1986), Tables 1 and 2, S = 1.
    [
        (1, 0.173, 3.300),
        (2, 0.708, 4.638),
        (3, 1.367, 5.918),
        (5, 2.840, 8.382),
        (10, 6.891, 14.27),
        (30, 24.55, 36.54),
    ],
)
def test_gehrels_one_sigma(count: int, lower: float, upper: float) -> None:
    found = poisson_interval(count, ONE_SIGMA, "exact")
    assert found.lower == pytest.approx(lower, rel=5e-4, abs=5e-4)
    assert found.upper == pytest.approx(upper, rel=5e-4)


@pytest.mark.parametrize(
    ("count", "lower", "upper"),
    # The same tables, S = 2; the printed 0.569 for three counts is a misprint of 0.596.
    [(1, 2.30e-2, 5.683), (3, 0.596, 8.902), (10, 4.719, 18.58)],
)
def test_gehrels_two_sigma(count: int, lower: float, upper: float) -> None:
    found = poisson_interval(count, TWO_SIGMA, "exact")
    assert found.lower == pytest.approx(lower, rel=2e-3)
    assert found.upper == pytest.approx(upper, rel=5e-4)


def test_garwood_95_per_cent() -> None:
    # Garwood limits as printed in handbooks: 0 (upper 3.6889), 5 and 10 counts.
    lower, upper = garwood(np.array([0, 5, 10, 5]), 0.95)
    assert lower == pytest.approx([0, 1.6235, 4.7954, 1.6235], abs=5e-5)
    assert upper == pytest.approx([3.6889, 11.6683, 18.3904, 11.6683], abs=5e-5)


def test_fifteen_counts_in_four_hundred() -> None:
    # Exact Poisson rate interval of 15 events in 400, as R and statsmodels print it.
    found = poisson_interval(15, 0.95, "exact").times(1 / 400)
    assert found.lower == pytest.approx(0.0209884653319583, rel=1e-12)
    assert found.upper == pytest.approx(0.0618505471787146, rel=1e-12)


def test_gehrels_upper_limit_of_nothing_is_the_histograms() -> None:
    # Gehrels gives 1.841 for no counts: the exact two-sided upper bound, which histogram bins show.
    assert garwood(np.array([0]), ONE_SIGMA)[1][0] == pytest.approx(1.841, abs=5e-4)


@pytest.mark.parametrize("level", [0.6827, 0.95])
def test_no_counts_give_a_one_sided_limit(level: float) -> None:
    # -ln(1 - level); 2.9957 at 95 %, the "rule of three".
    found = poisson_interval(0, level)
    assert (found.lower, found.upper_limit) == (0.0, True)
    assert found.upper == pytest.approx(-log(1 - level))
    assert exp(-found.upper) == pytest.approx(1 - level)


def test_the_rule_of_three() -> None:
    assert poisson_interval(0, 0.95).upper == pytest.approx(2.9957, abs=5e-5)


@pytest.mark.parametrize(
    ("hits", "trials", "lower", "upper"),
    # Clopper-Pearson 95 %, Newcombe, Stat. Med. 17, 857 (1998) (values from memory, recalculated).
    [(81, 263, 0.25274, 0.36762), (1, 29, 0.00087, 0.17764)],
)
def test_newcombe(hits: int, trials: int, lower: float, upper: float) -> None:
    found = binomial_interval(hits, trials, 0.95, "exact")
    assert found.lower == pytest.approx(lower, abs=6e-6)
    assert found.upper == pytest.approx(upper, abs=6e-6)


def test_no_hits_in_twenty() -> None:
    # Newcombe's 0/20 is two-sided, 0.16843; ours is one-sided at the level, so ask for 97.5 %.
    assert binomial_interval(0, 20, 0.975).upper == pytest.approx(0.16843, abs=6e-6)


def test_ratio_of_poisson_means() -> None:
    # Gu et al., Biom. J. 50, 283 (2008): 60 events in 51477.5 against 30 in 54308.7.
    found = ratio_interval(60, 30, 54308.7 / 51477.5, 0.95, "exact")
    assert found.lower == pytest.approx(1.339736, rel=1e-6)
    assert found.upper == pytest.approx(3.388366, rel=1e-6)
    assert pytest.approx(2.1099976) == 60 / 51477.5 / (30 / 54308.7)
    # The one-sided p-value printed there, 0.000428; ours is two-sided.
    assert ratio_p_value(60, 30, 54308.7 / 51477.5) == pytest.approx(2 * 0.000428, rel=2e-3)


def test_dodder_seeds() -> None:
    # 0 against 3 in equal samples (Przyborowski and Wilenski, Biometrika 31, 313 (1940)).
    assert ratio_p_value(0, 3, 1.0) == pytest.approx(0.25)
    assert ratio_interval(0, 3, 1.0, 0.95).upper_limit


@given(st.integers(1, 2_000), LEVELS)
def test_exact_poisson_equals_chi_squared_quantiles(count: int, level: float) -> None:
    tail = (1 - level) / 2
    found = poisson_interval(count, level, "exact")
    assert found.lower == pytest.approx(stats.chi2.ppf(tail, 2 * count) / 2, rel=1e-10)
    assert found.upper == pytest.approx(stats.chi2.ppf(1 - tail, 2 * count + 2) / 2, rel=1e-10)


@given(st.integers(1, 2_000), LEVELS)
def test_mid_p_solves_its_equation_and_lies_inside_exact(count: int, level: float) -> None:
    tail = (1 - level) / 2
    found, exact = poisson_interval(count, level), poisson_interval(count, level, "exact")
    above, at = stats.poisson.sf(count, found.lower), stats.poisson.pmf(count, found.lower)
    assert above + at / 2 == pytest.approx(tail, rel=1e-9)
    below, at = stats.poisson.cdf(count - 1, found.upper), stats.poisson.pmf(count, found.upper)
    assert below + at / 2 == pytest.approx(tail, rel=1e-9)
    assert exact.lower < found.lower < count < found.upper < exact.upper
    assert poisson_interval(count + 1, level).lower > found.lower


@given(st.integers(1, 300), st.integers(0, 300), LEVELS)
def test_binomial_mid_p(hits: int, misses: int, level: float) -> None:
    tail, trials = (1 - level) / 2, hits + misses
    found = binomial_interval(hits, trials, level)
    law = stats.binom(trials, found.lower)
    assert law.sf(hits) + law.pmf(hits) / 2 == pytest.approx(tail, rel=1e-8)
    if misses:
        law = stats.binom(trials, found.upper)
        assert law.cdf(hits - 1) + law.pmf(hits) / 2 == pytest.approx(tail, rel=1e-8)
    else:
        assert found.upper == 1
    exact = binomial_interval(hits, trials, level, "exact")
    assert exact.lower <= found.lower <= hits / trials <= found.upper <= exact.upper


@given(st.integers(1, 500), st.integers(1, 500), st.floats(0.01, 100), LEVELS)
def test_a_ratio_turned_over_has_the_bounds_turned_over(
    count: int, reference: int, exposure: float, level: float
) -> None:
    found = ratio_interval(count, reference, exposure, level)
    other = ratio_interval(reference, count, 1 / exposure, level)
    assert isclose(found.lower, 1 / other.upper, rel_tol=1e-8)
    assert isclose(found.upper, 1 / other.lower, rel_tol=1e-8)


def test_a_limit_for_many_trials_keeps_its_digits() -> None:
    # (1 - p)^n = 1 - level: p n -> -ln(1 - level) = 2.9957 at 95 %, the "rule of three".
    found = binomial_interval(0, 10**12, 0.95)
    assert found.upper * 10**12 == pytest.approx(-log(0.05), rel=1e-11)


@pytest.mark.parametrize("level", [0.6827, 0.95])
def test_at_its_ends_mid_p_is_the_exact_one_sided_bound(level: float) -> None:
    # P(X = 0) / 2 = (1 - level) / 2 is exp(-mean) = 1 - level; likewise p^n for hits only.
    assert poisson_interval(0, level) == poisson_interval(0, level, "exact")
    assert binomial_interval(7, 7, level).lower == pytest.approx((1 - level) ** (1 / 7))
    # Clopper-Pearson is two-sided there.
    exact = binomial_interval(7, 7, level, "exact")
    assert exact.lower == pytest.approx(stats.beta.ppf((1 - level) / 2, 7, 1))
    assert exact.upper == 1


def test_without_trials_nothing_is_known() -> None:
    assert binomial_interval(0, 0, 0.95) == (0.0, 1.0, True)


@given(st.integers(1, 2_000), st.integers(1, 2_000), LEVELS)
def test_exact_binomial_equals_beta_quantiles(hits: int, misses: int, level: float) -> None:
    tail = (1 - level) / 2
    found = binomial_interval(hits, hits + misses, level, "exact")
    assert found.lower == pytest.approx(stats.beta.ppf(tail, hits, misses + 1), rel=1e-10)
    assert found.upper == pytest.approx(stats.beta.ppf(1 - tail, hits + 1, misses), rel=1e-10)


@pytest.mark.parametrize("reference", [10**6, 10**9, 10**12])
def test_huge_references_leave_the_interval_of_the_count(reference: int) -> None:
    # With the reference known well, the ratio has the interval of a Poisson mean.
    found = ratio_interval(10, reference, float(reference), 0.6827)
    mean = poisson_interval(10, 0.6827)
    assert found.lower == pytest.approx(mean.lower, rel=3e-5)
    assert found.upper == pytest.approx(mean.upper, rel=3e-5)
    assert ratio_interval(reference, 1, 1.0, 0.6827).lower == pytest.approx(
        1 / ratio_interval(1, reference, 1.0, 0.6827).upper, rel=1e-12
    )


@given(st.integers(0, 300), st.integers(0, 300), st.floats(0.1, 10))
def test_p_value_is_twice_the_smaller_binomial_tail(
    count: int, reference: int, exposure: float
) -> None:
    law = stats.binom(count + reference, 1 / (1 + exposure))
    two_sided = min(1.0, 2 * min(law.cdf(count), law.sf(count - 1)))
    assert ratio_p_value(count, reference, exposure) == pytest.approx(two_sided, rel=1e-7)


def test_p_values_far_out_do_not_vanish() -> None:
    assert ratio_p_value(200, 0, 1.0) == pytest.approx(2 * 0.5**200)
    assert ratio_p_value(0, 200, 1.0) == pytest.approx(2 * 0.5**200)


def test_ratio_at_its_ends() -> None:
    assert ratio_interval(0, 0, 2.0, 0.95) == (0.0, inf, True)
    assert ratio_interval(5, 0, 2.0, 0.95).upper == inf
    assert ratio_p_value(0, 0, 1.0) == 1.0


def test_a_million_million_counts_follow_the_normal_law() -> None:
    n = 10**12
    found = poisson_interval(n, ONE_SIGMA)
    assert found.upper - n == pytest.approx(n**0.5, rel=1e-5)
    assert n - found.lower == pytest.approx(n**0.5, rel=1e-5)


def coverage(mean: float, level: float, kind: Kind) -> float:
    """Exact probability that the interval holds the mean, by summing the Poisson law."""
    counts = range(int(mean + 12 * mean**0.5 + 20))
    held = [n for n in counts if (b := poisson_interval(n, level, kind)).lower <= mean <= b.upper]
    return float(stats.poisson.pmf(held, mean).sum())


def test_mid_p_covers_as_promised_on_average_and_exact_never_less() -> None:
    # Averaged over the mean, mid-P covers 0.69 between 2 and 10 counts, 0.76 below two.
    few = np.mean([coverage(m, 0.6827, "mid-p") for m in np.arange(0.05, 2, 0.05)])
    more = np.mean([coverage(m, 0.6827, "mid-p") for m in np.arange(2, 10, 0.05)])
    assert few == pytest.approx(0.76, abs=0.02)
    assert more == pytest.approx(0.69, abs=0.01)
    exact = [coverage(m, 0.6827, "exact") for m in np.arange(2.5, 10, 0.05)]
    assert min(exact) > 0.6827


@pytest.mark.parametrize(
    ("level", "least", "worst"), [(0.6827, 0.574, 1.1479), (0.95, 0.938, 2.9958)]
)
def test_the_limit_at_zero_counts_costs_coverage_in_one_place(
    level: float, least: float, worst: float
) -> None:
    # Two-sided with counts, one-sided without: the price of deciding after the count is seen
    # (Feldman and Cousins, Phys. Rev. D 57, 3873 (1998), sec. III). Just above -ln(1 - level) zero
    # counts no longer hold the mean; from -ln((1 - level) / 2) on "exact" keeps its word again.
    gap = -log(1 - level), -log((1 - level) / 2)
    assert gap[0] == pytest.approx(worst, abs=2e-4)
    assert coverage(gap[0] + 1e-6, level, "exact") == pytest.approx(least, abs=1e-3)
    inside = [coverage(m, level, "exact") for m in np.linspace(gap[0] + 1e-6, gap[1], 60)]
    assert min(inside) == inside[0]
    outside = [*np.linspace(0.01, gap[0] - 1e-6, 100), *np.linspace(gap[1] + 1e-6, 15, 400)]
    assert min(coverage(m, level, "exact") for m in outside) >= level


def test_bins_of_histograms_cover_at_every_mean() -> None:
    # Two-sided also at zero counts; 0.72 to 0.92 for means of 0.5 to 10 (summed Poisson laws).
    lower, upper = garwood(np.arange(60), 0.6827)
    means = np.linspace(0.5, 10, 400)
    held = [
        float(stats.poisson.pmf(np.flatnonzero((lower <= m) & (m <= upper)), m).sum())
        for m in means
    ]
    assert 0.6827 < min(held) < 0.73
    assert 0.9 < max(held) < 0.98


@given(st.integers(0, 200), st.integers(1, 200), LEVELS, st.sampled_from(["mid-p", "exact"]))
def test_a_ratio_rises_with_its_count(count: int, reference: int, level: float, kind: Kind) -> None:
    found = ratio_interval(count, reference, 2.0, level, kind)
    more = ratio_interval(count + 1, reference, 2.0, level, kind)
    assert found.lower < more.lower
    assert found.upper < more.upper
    assert found.lower <= 2 * count / reference <= found.upper
    exact = ratio_interval(count, reference, 2.0, level, "exact")
    slack = 1 + 1e-9
    assert exact.lower <= found.lower * slack
    assert found.upper <= exact.upper * slack


def test_ratios_of_a_million_million_counts_follow_the_normal_law() -> None:
    n = 10**12
    for kind in ("mid-p", "exact"):
        found = ratio_interval(n, n, 1.0, ONE_SIGMA, kind)
        assert found.upper - 1 == pytest.approx((2 / n) ** 0.5, rel=1e-4)
        assert 1 - found.lower == pytest.approx((2 / n) ** 0.5, rel=1e-4)
