"""Wall times of origins that move."""

from __future__ import annotations

from fractions import Fraction

import pytest

from tagstream.recording.header import RecordingHeader, moved_utc


@pytest.mark.parametrize(
    ("utc", "shift_ps", "moved"),
    [
        ("2026-12-01T23:59:59+01:00", 10**12, "2026-12-02T00:00:00.000000+01:00"),
        ("2026-12-01T00:00:00Z", -(10**9), "2026-11-30T23:59:59.999000+00:00"),
        ("yesterday", 0, None),
        ("9999-12-31T23:59:59", 10**12, None),
    ],
)
def test_wall_times_move_or_are_unknown(utc: str, shift_ps: int, moved: str | None) -> None:
    assert moved_utc(utc, shift_ps) == moved


def test_what_is_not_known_stays_so() -> None:
    assert RecordingHeader().moved(10**12, Fraction(3)) == (None, None)


def test_the_tick_at_or_after_the_new_origin() -> None:
    assert RecordingHeader(origin_ticks=10).moved(100, Fraction(3))[0] == 44  # 43.3 ticks
