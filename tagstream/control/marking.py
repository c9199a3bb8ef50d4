"""Marks as a person writes them, to requests."""

from __future__ import annotations

from collections.abc import Iterable

from tagstream.control.requests import BadRequestError, MarkRequest, mark_request
from tagstream.errors import SettingsError
from tagstream.marks import parsed_value


def mark_requests(texts: Iterable[str], at_ps: int | None) -> list[MarkRequest]:
    """A request for each "key=value". Raises SettingsError with everything that is wrong."""
    found: list[MarkRequest] = []
    problems: list[str] = []
    for text in texts:
        key, equals, value = text.partition("=")
        if not equals:
            problems.append(f"{text}: right would be KEY=VALUE, such as power_mw=1.5")
            continue
        try:
            found.append(mark_request(key, parsed_value(value), at_ps))
        except BadRequestError as error:
            problems.append(f"{text}: {error}")
    if problems:
        raise SettingsError(problems)
    return found
