"""One table of a settings file against its class, with every problem as a sentence.

A sentence names the file, the key, what was found and what would be right.
"""

from __future__ import annotations

from difflib import get_close_matches
from typing import Any, TypeVar

from pydantic import ValidationError

from tagstream.settings.section import Section

S = TypeVar("S", bound=Section)

_RIGHT = {
    "int_type": "a whole number",
    "int_parsing": "a whole number",
    "int_from_float": "a whole number",
    "float_type": "a number",
    "float_parsing": "a number",
    "finite_number": "a finite number",
    "string_type": "a text",
    "path_type": "a path",
    "bool_type": "true or false",
    "bool_parsing": "true or false",
    "list_type": "a list",
    "tuple_type": "a list",
    "too_short": "a longer list",
    "too_long": "a shorter list",
    "dict_type": "a table",
    "model_type": "a table",
}
_BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "at most"),
}


def validate_section(
    model: type[S], table: dict[str, Any], where: str, problems: list[str], file: str
) -> S | None:
    """The section that `table` describes, or None after adding every problem to `problems`.

    where: the table as a person would write it, such as "[rolling]" or "[[tally]] hbt".
    """
    try:
        return model.model_validate(table)
    except ValidationError as error:
        found: dict[str, list[dict[str, Any]]] = {}
        for detail in error.errors():
            found.setdefault(_key(detail["loc"]), []).append(dict(detail))
        for key, details in found.items():
            problems.append(
                f"{file}: {where} {_sentence(model, key, details)}".replace(" : ", ": ")
            )
        return None


def nearest(word: str, known: list[str]) -> str:
    """A hint such as `; nearest known is "bin"`, or the known words if none is near."""
    close = get_close_matches(word, known, n=1, cutoff=0.6)
    if close:
        return f'nearest known is "{close[0]}"'
    return "known are " + ", ".join(sorted(known)) if known else "none is known here"


def shown(value: Any) -> str:
    """A found value as a person would write it in the file, shortened."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "a table"
    text = f'"{value}"' if isinstance(value, str) else repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _key(loc: tuple[int | str, ...]) -> str:
    """The key of an error; list positions count from 1, names of union branches are left out."""
    words = []
    for part in loc:
        if isinstance(part, int):
            words.append(f"entry {part + 1}")
        elif part.replace("_", "").isalnum() and part.islower() and part not in ("int", "tuple"):
            words.append(part)
    return ", ".join(words)


def _sentence(model: type[Section], key: str, details: list[dict[str, Any]]) -> str:
    first = details[0]
    if first["type"] == "extra_forbidden":
        return f"{key}: unknown key; {nearest(key.split(', ')[-1], _keys_at(model, first['loc']))}"
    if first["type"] == "missing":
        return f"{key}: missing; it must be given"
    rights = dict.fromkeys(_right(detail) for detail in details)
    right = " or ".join(rights)
    if not key:  # a rule between keys: its text names them
        return f": right would be {right}"
    return f"{key}: found {shown(first['input'])}; right would be {right}"


def _keys_at(model: type[Section], loc: tuple[int | str, ...]) -> list[str]:
    """The keys allowed where an unknown one was found (inside a list of tables, say)."""
    current = model
    for part in loc[:-1]:
        for name, field in current.model_fields.items():
            if part == (field.alias or name):
                args = getattr(field.annotation, "__args__", ())
                inner = [a for a in args if isinstance(a, type) and issubclass(a, Section)]
                current = inner[0] if inner else current
    return current.keys()


def _right(detail: dict[str, Any]) -> str:
    kind, context = detail["type"], detail.get("ctx", {})
    if kind == "value_error":
        return str(context["error"])
    if kind in _BOUNDS:
        name, word = _BOUNDS[kind]
        return f"a number {word} {context[name]}"
    if kind == "literal_error":
        return "one of " + str(context["expected"]).replace("'", '"').replace(" or ", ", ")
    if kind == "string_pattern_mismatch":
        return f"a name that fits {context['pattern']}"
    return _RIGHT.get(kind, str(detail["msg"]))
