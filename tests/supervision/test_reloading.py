"""What may change while a run goes on, and what is refused by name."""

from __future__ import annotations

import pytest

from tagstream.errors import SettingsError
from tagstream.settings.measures import CountRate
from tagstream.supervision.reloading import FIXED, refuse_fixed
from tests.fakes_settings import make_settings


def test_estimates_may_change() -> None:
    now = make_settings()
    rate = CountRate.model_validate({"name": "r", "kind": "count-rate", "channel": "a"})
    refuse_fixed(now, now.model_copy(update={"estimates": [rate]}))


@pytest.mark.parametrize("key", ["rolling", "conditioning", "channels", "tallies"])
def test_what_is_counted_together_may_not(key: str) -> None:
    now = make_settings()
    other = now.model_copy(update={key: None})
    with pytest.raises(SettingsError) as refused:
        refuse_fixed(now, other)
    (problem,) = refused.value.problems
    assert problem.startswith(FIXED[key])
