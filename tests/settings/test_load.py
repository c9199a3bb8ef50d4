"""Settings: every problem at once, each naming file, key, what was found and what is right."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from tagstream.errors import SettingsError
from tagstream.settings import load_settings

GOOD = """
title = "emitter 3, pulsed, two arms"
[feed]
kind = "recording"
path = "events.h5"
[channels.clock]
input = 0
[channels.arm_a]
input = 1
delay = "1.20 ns"
dead_time = "45 ns"
[channels.arm_b]
input = 2
[conditioning]
max_disorder = "1 us"
[rolling]
slice = "1 s"
spans = ["10 s", "1 min"]
[[tally]]
name = "hbt"
kind = "cross-correlation"
start = "arm_a"
stop = "arm_b"
max_lag = "125 ns"
bin = "100 ps"
[[estimate]]
name = "g2_zero"
kind = "g2-zero-pulsed"
tally = "hbt"
period = "80 MHz"
window = "3 ns"
side_peaks = 8
[[estimate]]
name = "rate_a"
kind = "count-rate"
channel = "arm_a"
dead_time_model = "non-paralyzable"
[results]
folder = "runs"
name = "emitter-3"
"""


@pytest.fixture
def file(tmp_path: Path) -> Path:
    return tmp_path / "settings.toml"


def problems(file: Path, text: str, *overrides: str) -> list[str]:
    file.write_text(text)
    with pytest.raises(SettingsError) as caught:
        load_settings(file, overrides)
    assert caught.value.exit_code == 2
    assert all(isinstance(text, str) and text for text in caught.value.problems)
    return caught.value.problems


def test_good_settings(file: Path) -> None:
    file.write_text(GOOD)
    loaded = load_settings(file)
    settings = loaded.settings
    assert settings.channel_index == {"clock": 0, "arm_a": 1, "arm_b": 2}
    assert settings.channels["arm_a"].delay_ps == 1_200
    assert settings.estimates[0].period_ps == 12_500  # type: ignore[union-attr]
    assert settings.results.folder == file.parent / "runs"
    assert loaded.warnings == [f"[feed] path: {file.parent}/events.h5 does not exist"]


def test_effective_settings_have_every_default_and_read_back_the_same(file: Path) -> None:
    file.write_text(GOOD)
    loaded = load_settings(file)
    text = loaded.to_toml()
    assert tomllib.loads(text)["conditioning"]["max_jump"] == "10 s"
    again = file.parent / "elsewhere" / "settings.toml"
    again.parent.mkdir()
    again.write_text(text)
    assert load_settings(again).settings == loaded.settings


def test_all_problems_at_once(file: Path) -> None:
    text = (
        GOOD.replace('title = "emitter 3', 'titel = "emitter 3')
        .replace('kind = "recording"', 'kind = "recordings"')
        .replace('delay = "1.20 ns"', "delay = 1.2")
        .replace('bin = "100 ps"', 'bin = "70 ps"')
        .replace("side_peaks = 8", "side_peak = 8")
        .replace('channel = "arm_a"', 'channel = "arm_aa"')
    )
    found = problems(file, text)
    expected = [
        'settings.toml: titel: unknown section or key; nearest known is "title"',
        'settings.toml: [feed] kind: found "recordings"; nearest known is "recording"',
        "settings.toml: [channels.arm_a] delay: found 1.2; right would be a text with a unit,"
        ' such as "12.5 ns"',
        "settings.toml: [[tally]] hbt: right would be `max_lag` a multiple of `bin`: nearest are"
        " 124950 ps, 125020 ps",
        'settings.toml: [[estimate]] g2_zero side_peak: unknown key; nearest known is "side_peaks"',
        'settings.toml: [[estimate]] rate_a channel: there is no "arm_aa";'
        ' nearest known is "arm_a"',
    ]
    assert found == expected


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('start = "arm_a"', 'start = "arm_aa"', ["[[tally]] hbt start", "arm_aa", '"arm_a"']),
        ("input = 2", "input = 1", ["[channels.arm_b] input", "arm_a", "one channel per input"]),
        ("input = 2", "input = 70000", ["[channels.arm_b] input", "70000", "at most 65535"]),
        ("input = 2", "input = true", ["[channels.arm_b] input", "true", "whole number"]),
        ('slice = "1 s"', 'slice = "1.5 ms"', ["[rolling]", "multiple of 1 ms"]),
        ('slice = "1 s"', 'slice = "7 s"', ["[rolling]", "multiple of `slice`"]),
        ("side_peaks = 8", "side_peaks = 12", ["g2_zero side_peaks", "max_lag", "at most 9"]),
        ('window = "3 ns"', 'window = "50 ps"', ["g2_zero window", "one bin", "100 ps"]),
        ('period = "80 MHz"', "", ["g2_zero", "`period` or `clock`"]),
        ('name = "hbt"', 'name = "health"', ["health", "reserved"]),
        ('name = "hbt"', 'name = "Hbt"', ["hbt", "name that fits"]),
        ('dead_time = "45 ns"', "", ["rate_a dead_time_model", "a dead time is missing"]),
        ('path = "events.h5"', "", ["[feed] path", "missing"]),
        (
            'max_disorder = "1 us"',
            'max_disorder = "20 s"',
            ["[conditioning]", "at least", "max_jump"],
        ),
        ("[results]", '[recording]\nsegment = "0 GB"\n[results]', ["[recording] segment", "zero"]),
        ("[results]", "[[alert]]\nabove = 1.0\n[results]", ["[[alert]] 1", "`health`"]),
        ("[results]", "[results]\nevry = 3", ["[results] evry", "unknown key"]),
        ('name = "emitter-3"', 'name = "../x"', ["[results] name", "../x"]),
        ('spans = ["10 s", "1 min"]', 'spans = "10 s"', ["[rolling] spans", "a list"]),
        ('bin = "100 ps"', 'bin = "100 ps"\nsplit_by = "a/b"', ["hbt split_by", "without /"]),
        ('bin = "100 ps"', 'bin = "100 ps"\nsplit_limit = 9', ["hbt split_limit", "split_by"]),
    ],
)
def test_one_problem_each(file: Path, old: str, new: str, words: list[str]) -> None:
    assert old in GOOD
    text = " | ".join(problems(file, GOOD.replace(old, new, 1)))
    missing = [word for word in words if word not in text and word != "at least"]
    assert not missing, text


def test_a_tally_may_not_be_called_like_the_span_of_another(file: Path) -> None:
    second = GOOD[GOOD.index("[[tally]]") : GOOD.index("[[estimate]]")].replace("hbt", "hbt_10s")
    assert "hbt_10s is what span 10 s of hbt is called" in problems(file, GOOD + second)[0]


def test_memory_is_refused_above_its_limit(file: Path) -> None:
    text = GOOD.replace('max_lag = "125 ns"', 'max_lag = "100 us"').replace(
        "[rolling]", '[rolling]\nmemory = "1 MB"'
    )
    assert "[rolling] memory" in problems(file, text)[0]


def test_overrides_count_like_the_file(file: Path) -> None:
    file.write_text(GOOD)
    loaded = load_settings(
        file, ('rolling.slice="2 s"', "tally.hbt.bin=500 ps", "channels.arm_b.input=7")
    )
    assert loaded.settings.rolling.slice_ps == 2 * 10**12
    assert loaded.settings.tallies[0].bin_ps == 500
    assert loaded.settings.channels["arm_b"].input == 7
    assert "--set nonsense" in problems(file, GOOD, "nonsense")[0]
    assert "no table" in problems(file, GOOD, "title.x=3")[0]
    assert "[rolling] slise" in problems(file, GOOD, "rolling.slise=3")[0]


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (None, "no such file"),
        (b"", "[feed]: missing"),
        (b"\xff\xfe", "no UTF-8"),
        (b"[feed\nkind", "not TOML"),
        (b"feed = 3\n", "[feed]: found 3"),
        (b"[[feed]]\n", "[feed]"),
    ],
)
def test_files_that_are_no_settings(file: Path, content: bytes | None, words: str) -> None:
    if content is not None:
        file.write_bytes(content)
    with pytest.raises(SettingsError) as caught:
        load_settings(file)
    assert words in str(caught.value)
    assert "settings.toml" in str(caught.value)


def test_a_folder_is_no_settings_file(tmp_path: Path) -> None:
    with pytest.raises(SettingsError, match="cannot be read"):
        load_settings(tmp_path)


def test_a_bin_on_tick_edges_is_warned_of_with_the_two_nearest(file: Path) -> None:
    feed = (
        'kind = "columns"\npath = "e.csv"\ntime_column = "t"\nchannel_column = "c"\ntick = "4 ps"'
    )
    file.write_text(GOOD.replace('kind = "recording"\npath = "events.h5"', feed))
    bins = [text for text in load_settings(file).warnings if "bin:" in text]
    # 100 ps is 25 ticks of 4 ps: odd, so fine; 80 ps is 20: even, nearest are 19 and 21.
    assert bins == []
    text = file.read_text().replace('bin = "100 ps"', 'bin = "80 ps"').replace("125 ns", "120 ns")
    file.write_text(text)
    (warning,) = [text for text in load_settings(file).warnings if "bin:" in text]
    assert "76 ps or 84 ps" in warning


def test_paths_of_every_section_are_relative_to_the_file(file: Path) -> None:
    file.write_text(GOOD + '[recording]\nfolder = "tags"\n[security]\nkeys = "keys"\n')
    settings = load_settings(file).settings
    assert settings.recording is not None
    assert settings.recording.folder == file.parent / "tags"
    assert settings.security is not None
    assert settings.security.own_keys == file.parent / "keys"


def test_a_split_counts_for_the_memory(file: Path) -> None:
    # 2501 bins of 24 bytes for each value: 4 MB for 64 of them, 60 MB for 1000.
    text = GOOD.replace('max_lag = "125 ns"', 'max_lag = "125 ns"\nsplit_by = "power"')
    text = text.replace("[rolling]", '[rolling]\nmemory = "20 MB"')
    file.write_text(text)
    assert load_settings(file).settings.tallies[0].split_by == "power"
    many = text.replace('split_by = "power"', 'split_by = "power"\nsplit_limit = 1000')
    assert "split_limit" in problems(file, many)[0]


def test_a_feed_that_others_can_reach_warns(file: Path) -> None:
    records = (
        'kind = "tcp"\nlisten = "{}"\nrecord_bytes = 8\ntick = "1 ps"\n'
        "time_bits = [0, 48]\nchannel_bits = [48, 8]"
    )
    for address, warned in (("127.0.0.1:7700", False), ("0.0.0.0:7700", True)):
        text = GOOD.replace('kind = "recording"\npath = "events.h5"', records.format(address))
        file.write_text(text)
        found = [w for w in load_settings(file).warnings if "reached by others" in w]
        assert bool(found) == warned


def test_only_a_file_that_is_whole_is_asked_for_its_interval(file: Path) -> None:
    records = (
        'kind = "records"\npath = "a"\nfollow = {}\nrecord_bytes = 8\ntick = "1 ps"\n'
        "time_bits = [0, 48]\nchannel_bits = [48, 8]"
    )
    for follow in ("false", "true"):
        text = GOOD.replace('kind = "recording"\npath = "events.h5"', records.format(follow))
        file.write_text(text)
        found = [w for w in load_settings(file).warnings if "begin, end" in w]
        assert bool(found) == (follow == "false")


def test_the_common_tick_of_both_fields_is_the_native_one(file: Path) -> None:
    records = (
        'kind = "records"\npath = "a"\nrecord_bytes = 8\ntick = "5 ns"\n'
        "time_bits = [0, 40]\nchannel_bits = [56, 8]\n"
        'fine = { bits = [40, 10], tick = "10 ps", sign = "-" }'
    )
    text = GOOD.replace('kind = "recording"\npath = "events.h5"', records)
    file.write_text(text.replace("[[tally]]", "[[tally]]", 1))
    loaded = load_settings(file)
    assert any("native tick (10 ps)" in w for w in loaded.warnings)
    again = file.parent / "again.toml"
    again.write_text(loaded.to_toml())
    assert load_settings(again).settings == loaded.settings
