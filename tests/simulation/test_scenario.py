from __future__ import annotations

import tomllib
from fractions import Fraction
from pathlib import Path

import pytest

from tagstream.errors import SettingsError
from tagstream.simulation.scenario import build_scenario, load_scenario
from tests.simulation.scenes import COHERENT, PULSED, scenario, scenario_text

EMITTER = 'kind = "emitter"\nrate = "10 MHz"\nt0 = "20 ns"'


def problems(text: str) -> list[str]:
    with pytest.raises(SettingsError) as caught:
        build_scenario(tomllib.loads(text), "bad.toml")
    return caught.value.problems


def test_values_are_exact_and_carry_units() -> None:
    scene = scenario(
        PULSED.replace("12.5 ns", "76.2 MHz"),
        'efficiency = 0.5\njitter_fwhm = "0.35 ns"\ndead_time = "40 ns"\ndark_rate = "0.3 kHz"',
        "[clock]\ninput = 300\n",
        'title = "a"\ntick = "1/3 ns"',
    )
    assert scene.source.pulse_period == Fraction(10**7, 762)
    assert scene.tick_ps == Fraction(1000, 3)
    assert scene.duration_ps == 10**12
    assert scene.clock_rate_hz == 76.2e6
    arm = scene.arms[1]
    assert (arm.port, arm.share, arm.dead_time_ps, arm.dark_rate_hz) == (
        "reflected",
        0.25,
        40_000,
        300,
    )
    assert arm.jitter_sigma_ps == pytest.approx(350 / 2.354820)


# what is replaced, by what, and what the one problem must say
BAD = [
    (COHERENT, "rate", "rates", ["[source] rates: unknown key", 'nearest known is "rate"']),
    (COHERENT, '"1 MHz"', "1e6", ["[source] rate", "found 1000000.0", 'such as "250 kHz"']),
    (COHERENT, '"1 MHz"', '"1 ns"', ["[source] rate", 'found "1 ns"', "Hz, kHz, MHz, GHz"]),
    (COHERENT, '"1 MHz"', '"2000 GHz"', ["[source] rate", "from 0 Hz to 1000 GHz"]),
    (COHERENT, '"coherent"', '"coherrent"', ["[source] kind", 'nearest known is "coherent"']),
    (COHERENT, 'kind = "coherent"', "", ["[source] kind: missing", "pulsed-emitter"]),
    (COHERENT, '"coherent"', "3", ["[source] kind: found 3"]),
    (COHERENT, "input = 2", "input = 1", ["input: found 1 more than once"]),
    (COHERENT, '"reflected"', '"transmitted"', ['port: found "transmitted" more than once']),
    (
        COHERENT,
        '"reflected"',
        '"sideways"',
        ["[[detector]] 2 port", 'found "sideways"', "reflected"],
    ),
    (COHERENT, "reflectance = 0.5", "reflectance = 0.6", ["[splitter]", "sum of at most 1"]),
    (COHERENT, "reflectance = 0.5", "reflectance = true", ["[splitter] reflectance", "a number"]),
    (COHERENT, "reflectance = 0.5", "reflectance = nan", ["[splitter] reflectance", "found nan"]),
    (COHERENT, 'duration = "1 s"', "", ["scenario duration: missing"]),
    (COHERENT, 'duration = "1 s"', 'duration = "0 s"', ["scenario duration", "at least 1 ps"]),
    (COHERENT, "[splitter]", "[spliter]", ["spliter: unknown section", '"splitter"']),
    (EMITTER, '"20 ns"', '"30 ns"', ["[source]", "at most 1/(4 t0), here 8.33333 MHz"]),
    (EMITTER, 't0 = "20 ns"', "", ["[source] t0: missing"]),
    (PULSED, "0.1\ng", "2.5\ng", ["[source] photons_per_pulse", "at most 2"]),
    (PULSED, "0.1\ng", "1.5\ng", ["[source]", "mu - g2 mu^2 / 2 of at most 1"]),
    (PULSED, "g2_zero = 0.1", "g2_zero = 11.0", ["[source]", "pulses of three photons"]),
    (PULSED, "g2_zero = 0.1", "g2_zero = inf", ["[source] g2_zero", "found inf"]),
    (PULSED, '"12.5 ns"', '"76.123456789 MHz"', ["[source]", "fewer digits"]),
    (PULSED, '"12.5 ns"', '"0.5 ps"', ["[source]", "at least 1 ps"]),
    (PULSED, '"1 ns"', '"2 s"', ["[source] lifetime", 'found "2 s"', "at most 1 s"]),
]


@pytest.mark.parametrize(("source", "old", "new", "expected"), BAD)
def test_a_mistake_is_named_with_what_would_be_right(
    source: str, old: str, new: str, expected: list[str]
) -> None:
    text = scenario_text(source)
    assert old in text
    found = problems(text.replace(old, new))
    assert all(problem.startswith("bad.toml: ") for problem in found)
    assert any(all(part in problem for part in expected) for problem in found), found


@pytest.mark.parametrize(
    ("more", "expected"),
    [
        ("[clock]\ninput = 0\n", "[clock]: this source has no pulses"),
        ("[clock]\ninput = 0\ndivider = 0\n", "[clock] divider: found 0"),
        ("[clock]\ninput = 2\n", "input: found 2 more than once"),
        ('[truth]\nwindow = "0 ns"\n', "[truth] window"),
        ("afterpulse_probability = 0.1\n", "`afterpulse_time` together"),
        ("crosstalk_probability = 0.1\n", "`crosstalk_delay` together"),
        ("afterpulse_probability = 1.0\n", "[[detector]] 2 afterpulse_probability: found 1.0"),
        ('[drift]\nswing = 0.1\nperiod = "1 h"\n', "right would be at most 0.909091"),
        (
            "[drift]\nfading_per_hours = 0.1\n",
            '[drift] fading_per_hours: unknown key; nearest known is "fading_per_hour"',
        ),
        (
            '[[detector]]\ninput = 3\nport = "herald"\nefficiency = 1.0\n',
            'port: found "herald", which this source has not; known are transmitted, reflected',
        ),
        ("afterglow = 1\n", "[[detector]] 2 afterglow: unknown key"),
        ('[truth]\nwindows = "1 ns"\n', '[truth] windows: unknown key; nearest known is "window"'),
    ],
)
def test_mistakes_in_further_tables(more: str, expected: str) -> None:
    assert any(expected in problem for problem in problems(scenario_text(more=more)))


def test_a_herald_alone_sees_no_light_of_the_splitter() -> None:
    text = scenario_text('kind = "pairs"\nrate = "1 MHz"')
    text = text[: text.rindex("[[detector]]")].replace('"transmitted"', '"herald"')
    assert problems(text) == [
        "bad.toml: [[detector]]: only a herald; right would be a detector at the splitter too"
    ]


def test_a_window_longer_than_the_period() -> None:
    found = problems(scenario_text(PULSED, more='[truth]\nwindow = "13 ns"\n'))
    assert found == ["bad.toml: [truth] window: longer than the period, 12.5 ns"]


@pytest.mark.parametrize("tick", ["0.5 ps", "2 ms", "1.234567890123 us"])
def test_a_tick_out_of_range(tick: str) -> None:
    found = problems(scenario_text(head=f'tick = "{tick}"'))
    assert "a tick from 1 ps to 1 ms" in found[0]


def test_every_problem_is_reported_at_once() -> None:
    text = (
        'tick = 1\n[source]\nkind = "emitter"\nrate = 3\n[[detector]]\ninput = -1\nefficiency = 2\n'
    )
    found = "\n".join(problems(text))
    for key in ("tick", "duration", "rate", "t0", "[splitter]", "input", "port", "efficiency"):
        assert key in found


@pytest.mark.parametrize("text", ["", "detector = 3\nsource = 4\nsplitter = 5\ntruth = 6\n"])
def test_tables_that_are_missing_or_no_tables(text: str) -> None:
    found = "\n".join(problems(text))
    for where in ("[source]", "[splitter]", "[[detector]]"):
        assert where in found


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    broken = tmp_path / "broken.toml"
    broken.write_text("duration = \n")
    with pytest.raises(SettingsError, match=r"broken\.toml: not TOML"):
        load_scenario(broken)
    with pytest.raises(SettingsError, match="no such file; give the path of a scenario file"):
        load_scenario(tmp_path / "absent.toml")


def test_a_file_is_read(tmp_path: Path) -> None:
    file = tmp_path / "laser.toml"
    file.write_text(scenario_text(head='title = "laser"'))
    assert load_scenario(file).title == "laser"
    assert load_scenario(file).kind == "coherent"
