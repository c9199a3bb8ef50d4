"""Single values given on the command line in place of those in the settings file."""

from __future__ import annotations

import tomllib
from typing import Any


def apply_override(table: dict[str, Any], text: str, problems: list[str]) -> None:
    """Set one value of `table` in place from "key=value"; add a sentence to `problems` if not.

    Keys are dotted; an entry of a list of tables is found by its name or its number from 1.
    """
    key, equals, value = text.partition("=")
    words = key.strip().split(".")
    if not equals or not all(words):
        problems.append(f'--set {text}: right would be key=value, such as rolling.slice="2 s"')
        return
    current: Any = table
    for word in words[:-1]:
        found = _entry(current, word)
        if found is None and isinstance(current, dict):
            found = current.setdefault(word, {})
        current = found
    if not isinstance(current, dict):
        problems.append(f"--set {text}: the settings have no table {'.'.join(words[:-1])}")
        return
    current[words[-1]] = _value(value.strip())


def _entry(current: Any, word: str) -> Any:
    if isinstance(current, dict):
        return current.get(word)
    if isinstance(current, list):
        for number, entry in enumerate(current, 1):
            if isinstance(entry, dict) and word in (entry.get("name"), str(number)):
                return entry
    return None


def _value(text: str) -> Any:
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        return text
