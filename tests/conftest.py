"""What every test shares: a fixed seed for property tests and one place for the real events."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile(
    "repeatable",
    derandomize=True,
    deadline=None,
    max_examples=100,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.function_scoped_fixture],
)
settings.load_profile("repeatable")


@pytest.fixture
def real_events() -> Path:
    """1000 real detections on two detectors; origin in tests/data/README.md."""
    return Path(__file__).parent / "data" / "two_detector_events.csv"
