from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import nbinom, poisson

from tagstream.simulation.number_laws import (
    AtMostTwo,
    Chaotic,
    NumberLaw,
    Poissonian,
    draw_numbers,
)

LAWS: list[NumberLaw] = [AtMostTwo(0.4), Poissonian(), Chaotic(1.0), Chaotic(3.5)]


@pytest.mark.parametrize("law", LAWS, ids=repr)
def test_drawn_numbers_have_the_stated_mean_and_g2(law: NumberLaw) -> None:
    mean, pulses = 0.8, 400_000
    rng = np.random.default_rng(2)
    lit = rng.binomial(pulses, law.any(mean))
    numbers = draw_numbers(law.tail(mean), lit, rng)
    assert numbers.min() == 1
    assert numbers.sum() / pulses == pytest.approx(mean, rel=0.01)
    pairs = (numbers * (numbers - 1.0)).sum() / pulses
    assert pairs / mean**2 == pytest.approx(law.g2, rel=0.03)


@pytest.mark.parametrize("law", LAWS, ids=repr)
def test_losses_keep_the_law(law: NumberLaw) -> None:
    """Drawn at 0.9 and thinned to a third, nothing is left as often as the law says at 0.3."""
    rng = np.random.default_rng(3)
    lit = rng.binomial(200_000, law.any(0.9))
    left = rng.binomial(draw_numbers(law.tail(0.9), lit, rng), 1 / 3)
    seen = np.count_nonzero(left)
    assert seen == pytest.approx(200_000 * law.any(0.3), abs=4 * np.sqrt(seen))


def test_tails_are_those_of_the_textbook_laws() -> None:
    numbers = np.arange(1, 6)
    p = 3.5 / (0.7 + 3.5)
    np.testing.assert_allclose(
        Poissonian().tail(0.7)[:5], poisson.sf(numbers, 0.7) / poisson.sf(0, 0.7)
    )
    np.testing.assert_allclose(
        Chaotic(3.5).tail(0.7)[:5], nbinom.sf(numbers, 3.5, p) / nbinom.sf(0, 3.5, p)
    )
    # one thermal mode is the Bose-Einstein law: each further photon mean / (1 + mean) as likely
    np.testing.assert_allclose(Chaotic(1.0).tail(0.7)[:5], (0.7 / 1.7) ** numbers)


@pytest.mark.parametrize("law", LAWS, ids=repr)
def test_faint_and_dark_pulses(law: NumberLaw) -> None:
    assert law.any(1e-12) == pytest.approx(1e-12, rel=1e-9)
    assert law.any(0.0) == 0
    assert law.none(0.5) + law.any(0.5) == pytest.approx(1)
    assert draw_numbers(law.tail(0.0), 10, np.random.default_rng(1)).tolist() == [1] * 10


@pytest.mark.parametrize(("modes", "g2"), [(1.0, 2.0), (4.0, 1.25)])
def test_g2_of_modes(modes: float, g2: float) -> None:
    # K modes, unheralded: 1 + 1/K (textbook)
    assert Chaotic(modes).g2 == g2
