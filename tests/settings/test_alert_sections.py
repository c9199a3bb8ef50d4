"""What an [[alert]] section may say."""

from __future__ import annotations

from pathlib import Path

import pytest

from tagstream.settings import load_settings
from tests.settings.test_load import GOOD, problems


@pytest.fixture
def file(tmp_path: Path) -> Path:
    return tmp_path / "my.toml"


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ('health = "last_tag_ag_s"\nabove = 5.0', ["[[alert]] 1 health", '"last_tag_age_s"']),
        ('health = "silent_arm_c_s"\nabove = 5.0', ["[[alert]] 1 health", '"silent_arm_']),
        ('health = "gaps"\nabove = nan', ["[[alert]] 1 above", "finite"]),
        ('health = "gaps"\nabove = 1.0\nbelow = 0.0', ["either `above` or `below`"]),
        ('health = "gaps"\nspan = "10 s"\nabove = 1.0', ["`span` with `estimate`"]),
        ('health = "gaps"\nabove = 1.0\nclear = 2.0', ["quiet side"]),
        ('health = "gaps"\nabove = 1.0\ncommand = [""]', ["`command` a program"]),
        ('health = "gaps"\nabove = 1.0\ncommand = ["./x"]', ["whole path"]),
        ('health = "gaps"\nabove = 1.0\ncommand = "mail"', ["[[alert]] 1 command", "a list"]),
        ('estimate = "g2_zero"\nspan = "7 s"\nabove = 1.0', ["[[alert]] 1 span", "7 s"]),
    ],
)
def test_one_problem_each(file: Path, keys: str, words: list[str]) -> None:
    text = " | ".join(problems(file, f"{GOOD}\n[[alert]]\n{keys}\n"))
    missing = [word for word in words if word not in text]
    assert not missing, text


@pytest.mark.parametrize(
    "keys",
    [
        'health = "silent_arm_a_s"\nabove = 5.0\nhold = "30 s"',
        'health = "dropped_late"\nabove = 0',
        'estimate = "g2_zero"\nspan = "run"\nabove = 0.1\nclear = 0.08\ncommand = ["mail", "me"]',
        'estimate = "g2_zero"\nspan = "10 s"\nbelow = 0.1\ncommand = ["/usr/bin/true"]',
    ],
)
def test_what_is_right(file: Path, keys: str) -> None:
    file.write_text(f"{GOOD}\n[[alert]]\n{keys}\n")
    assert len(load_settings(file).settings.alerts) == 1
