"""A settings file to checked settings, all problems in one error."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import tomli_w
from pydantic import TypeAdapter

from tagstream.errors import SettingsError
from tagstream.settings import rules
from tagstream.settings.feeds import FEED_KINDS
from tagstream.settings.measures import ESTIMATE_KINDS, TALLY_KINDS
from tagstream.settings.overrides import apply_override
from tagstream.settings.quantities import Name
from tagstream.settings.section import Section
from tagstream.settings.sections import (
    Alert,
    Channel,
    Conditioning,
    Control,
    Metrics,
    Publish,
    Recording,
    Results,
    Rolling,
    Security,
    Settings,
)
from tagstream.settings.validation import nearest, shown, validate_section

_TABLES: dict[str, type[Section]] = {
    "conditioning": Conditioning,
    "rolling": Rolling,
    "results": Results,
    "recording": Recording,
    "publish": Publish,
    "control": Control,
    "metrics": Metrics,
    "security": Security,
}
_KEYS = ["title", "feed", "channels", "tally", "estimate", "alert", *_TABLES]


@dataclass(frozen=True, slots=True)
class LoadedSettings:
    """Checked settings, what a person should know about them, and the file they came from."""

    settings: Settings
    warnings: list[str]
    file: Path
    overrides: tuple[str, ...] = ()

    def for_replay(self) -> LoadedSettings:
        """The same, where recordings stand in for the feed: what concerns it warns nobody."""
        rest = [text for text in self.warnings if not text.startswith("[feed]")]
        return LoadedSettings(self.settings, rest, self.file, self.overrides)

    def to_toml(self) -> str:
        """The effective settings: every default written out, paths absolute."""
        table = self.settings.model_dump(by_alias=True, exclude_none=True)
        return tomli_w.dumps(_plain(table), multiline_strings=False)


def load_settings(file: Path, overrides: tuple[str, ...] = ()) -> LoadedSettings:
    """Read, check and complete a settings file.

    overrides: texts "key=value" with dotted keys, as in `rolling.slice="2 s"` or
    `tally.hbt.bin="300 ps"`; the value is read as TOML, or as plain text if it is none.
    Raises SettingsError that holds every problem found.
    """
    table = read_toml(file)
    problems: list[str] = []
    for text in overrides:
        apply_override(table, text, problems)
    _check_keys(table, file.name, problems)
    found = _Sections(file.name, problems)
    parts: dict[str, Any] = {
        "title": table.get("title", ""),
        "feed": found.kind_of(FEED_KINDS, table.get("feed"), "[feed]"),
        "channels": found.channels(table.get("channels")),
        "tallies": found.each(TALLY_KINDS, table.get("tally", []), "tally"),
        "estimates": found.each(ESTIMATE_KINDS, table.get("estimate", []), "estimate"),
        "alerts": found.alerts(table.get("alert", [])),
    }
    for key, model in _TABLES.items():
        if key in table or key == "results":
            parts[key] = found.table(model, table.get(key), f"[{key}]")
    if not isinstance(parts["title"], str):
        problems.append(f"{file.name}: title: found {shown(parts['title'])}; right is a text")
    parts.setdefault("rolling", Rolling())
    parts["names"] = {
        "channels": list(table["channels"]) if isinstance(table.get("channels"), dict) else [],
        "tally": _names(table.get("tally")),
        "estimate": _names(table.get("estimate")),
    }
    problems += [f"{file.name}: {text}" for text in rules.problems(parts)]
    if problems:
        raise SettingsError(problems)
    del parts["names"]
    settings = _absolute(Settings.model_construct(**parts), file.resolve().parent)
    return LoadedSettings(settings, rules.warnings(settings), file, overrides)


def read_toml(file: Path, what: str = "settings") -> dict[str, Any]:
    """The tables of a TOML file; raises SettingsError, which calls it a `what` file."""
    try:
        return tomllib.loads(file.read_bytes().decode("utf-8"))
    except FileNotFoundError:
        raise SettingsError([f"{file}: no such file; give the path of a {what} file"]) from None
    except OSError as error:
        raise SettingsError([f"{file}: cannot be read: {error.strerror}"]) from None
    except UnicodeDecodeError as error:
        raise SettingsError(
            [f"{file}: byte {error.start} is no UTF-8; a {what} file is TOML text"]
        ) from None
    except tomllib.TOMLDecodeError as error:
        raise SettingsError([f"{file}: not TOML: {error}"]) from None


def _check_keys(table: dict[str, Any], file: str, problems: list[str]) -> None:
    for key in table:
        if key not in _KEYS:
            problems.append(f"{file}: {key}: unknown section or key; {nearest(key, _KEYS)}")


class _Sections:
    """Checks table by table, so that a problem in one hides no problem in another."""

    def __init__(self, file: str, problems: list[str]) -> None:
        self.file, self.problems = file, problems

    def problem(self, text: str) -> None:
        self.problems.append(f"{self.file}: {text}")

    def table(self, model: type[Section], value: Any, where: str) -> Section | None:
        if value is None:
            self.problem(f"{where}: missing; it must be given")
        elif not isinstance(value, dict):
            self.problem(f"{where}: found {shown(value)}; right would be a table")
        else:
            return validate_section(model, value, where, self.problems, self.file)
        return None

    def kind_of(self, kinds: dict[str, type[Section]], value: Any, where: str) -> Section | None:
        if not isinstance(value, dict):
            return self.table(Section, value, where)
        kind = value.get("kind")
        if kind is None:
            self.problem(f"{where} kind: missing; one of {', '.join(kinds)}")
        elif kind not in kinds:
            self.problem(f"{where} kind: found {shown(kind)}; {nearest(str(kind), list(kinds))}")
        else:
            return self.table(kinds[kind], value, where)
        return None

    def each(self, kinds: dict[str, type[Section]], value: Any, key: str) -> list[Section]:
        """The sections of a list of tables; of a broken one, only its problems."""
        if not isinstance(value, list):
            self.problem(f"{key}: found {shown(value)}; right would be tables [[{key}]]")
            return []
        named = [_where(key, number, table) for number, table in enumerate(value, 1)]
        sections = [
            self.kind_of(kinds, table, where) for table, where in zip(value, named, strict=True)
        ]
        return [section for section in sections if section is not None]

    def alerts(self, value: Any) -> list[Section]:
        if not isinstance(value, list):
            self.problem(f"alert: found {shown(value)}; right would be tables [[alert]]")
            return []
        sections = [
            self.table(Alert, table, f"[[alert]] {number}") for number, table in enumerate(value, 1)
        ]
        return [section for section in sections if section is not None]

    def channels(self, value: Any) -> dict[str, Channel]:
        if not isinstance(value, dict) or not value:
            self.problem("[channels]: missing; at least one table such as [channels.arm_a]")
            return {}
        found: dict[str, Channel] = {}
        for name, table in value.items():
            try:
                TypeAdapter(Name).validate_python(name)
            except ValueError:
                self.problem(f"[channels.{name}]: {rules.NAME_RULE}")
            channel = self.table(Channel, table, f"[channels.{name}]")
            if isinstance(channel, Channel):
                found[name] = channel
        return found


def _names(tables: Any) -> list[str]:
    """The names in a list of tables, also of those with problems of their own."""
    found = (
        [t.get("name") for t in tables if isinstance(t, dict)] if isinstance(tables, list) else []
    )
    return [name for name in found if isinstance(name, str)]


def _where(key: str, number: int, table: Any) -> str:
    name = table.get("name") if isinstance(table, dict) else None
    return f"[[{key}]] {name if isinstance(name, str) else number}"


def _absolute(settings: Settings, base: Path) -> Settings:
    """Paths are relative to the settings file, not to the folder one happens to be in."""
    return settings.model_copy(
        update={
            key: _with_absolute_paths(section, base)
            for key in ("feed", "results", "recording", "security")
            if (section := getattr(settings, key)) is not None
        }
    )


def _with_absolute_paths(section: Section, base: Path) -> Section:
    return section.model_copy(
        update={
            key: base / value.expanduser()
            for key in type(section).model_fields
            if isinstance(value := getattr(section, key), Path)
        }
    )


def _plain(value: Any) -> Any:
    """Paths and tuples as TOML knows them."""
    if isinstance(value, dict):
        return {key: _plain(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(inner) for inner in value]
    return str(value) if isinstance(value, Path) else value
