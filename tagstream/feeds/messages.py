"""One message of tags: three frames of bytes to checked numbers and back; no sockets.

The frames are a header in JSON, times as int64 and inputs as uint16, both little-endian. What a
sender may have got wrong comes out as `MessageError`, and as nothing else.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.feeds.sessions import parse_utc
from tagstream.settings.quantities import check_tick
from tagstream.units import format_time, parse_time

FORMAT = "tagstream-tags"
VERSION = 1
MOST_TAGS = 1 << 22  # in one message
MOST_TICKS = 1 << 62  # of begin and end, either side of zero
MOST_COUNT = 1 << 62  # of sequence and lost
HEADER_BYTES = 1 << 16
NAME_LENGTH = 200
TEXT_LENGTH = 40
FRAMES = 3
_LARGE_EXPONENT = re.compile(r"[eE][+-]?\d{3}")  # would take for ever to write out

Frame = bytes | memoryview


class MessageError(Exception):
    """A message that is not as it should be; the text is a short reason."""


@dataclass(frozen=True, slots=True)
class TagsHeader:
    """What a message says of itself.

    stream, session: who sends, and since which start of the sender. sequence: number of the
    message in its session. begin, end: in ticks, half-open; all tags of it are in the message.
    lost: tags of it that the sender knows to be missing. zero_utc: wall time of count zero.
    """

    stream: str
    session: str
    sequence: int
    count: int
    tick: Fraction
    begin: int
    end: int
    lost: int = 0
    zero_utc: str | None = None


@dataclass(frozen=True, slots=True)
class TagsMessage:
    """A message as it came. ticks: int64, inputs: uint16, both of header.count items."""

    header: TagsHeader
    ticks: NDArray[np.int64]
    inputs: NDArray[np.uint16]


def parse_message(frames: Sequence[Frame]) -> TagsMessage:
    """A message from its frames; the arrays share their memory. Raises MessageError."""
    if len(frames) != FRAMES:
        raise MessageError(f"{len(frames)} frames; right would be {FRAMES}")
    header = parse_header(frames[0])
    for name, frame, width in (("times", frames[1], 8), ("inputs", frames[2], 2)):
        if len(frame) != header.count * width:
            raise MessageError(
                f"{len(frame)} bytes of {name}; right would be {header.count * width}"
                f" for {header.count} tags"
            )
    return TagsMessage(header, _array(frames[1], np.int64), _array(frames[2], np.uint16))


def parse_header(frame: Frame) -> TagsHeader:
    """The header from its frame. Raises MessageError."""
    if len(frame) > HEADER_BYTES:
        raise MessageError(f"header of {len(frame)} bytes; at most {HEADER_BYTES} are right")
    table = _table(frame)
    if table.get("format") != FORMAT:
        raise MessageError(f"format is {_shown(table.get('format'))}; right would be {FORMAT}")
    version = table.get("version")
    if type(version) is not int or version != VERSION:
        raise MessageError(f"version is {_shown(version)}; this program reads {VERSION}")
    header = TagsHeader(
        stream=_name(table, "stream"),
        session=_name(table, "session"),
        sequence=_whole(table, "sequence", 0, MOST_COUNT),
        count=_whole(table, "count", 0, MOST_TAGS),
        tick=_converted(table, "tick", _tick),
        begin=_whole(table, "begin", -MOST_TICKS, MOST_TICKS),
        end=_whole(table, "end", -MOST_TICKS, MOST_TICKS),
        lost=_whole(table, "lost", 0, MOST_COUNT),
        zero_utc=None if table.get("zero_utc") is None else _converted(table, "zero_utc", _utc),
    )
    if header.begin > header.end:
        raise MessageError(f"begin {header.begin} lies after end {header.end}")
    return header


def header_bytes(header: TagsHeader) -> bytes:
    """The first frame of a message."""
    table: dict[str, Any] = {
        "format": FORMAT,
        "version": VERSION,
        "stream": header.stream,
        "session": header.session,
        "sequence": header.sequence,
        "count": header.count,
        "tick": format_time(header.tick),
        "begin": header.begin,
        "end": header.end,
        "lost": header.lost,
    }
    if header.zero_utc is not None:
        table["zero_utc"] = header.zero_utc
    return json.dumps(table).encode()


def message_frames(message: TagsMessage) -> list[Frame]:
    """The frames of a message, ready to be sent; those of arrays share their memory."""
    ticks = np.ascontiguousarray(message.ticks, "<i8")
    inputs = np.ascontiguousarray(message.inputs, "<u2")
    return [
        header_bytes(message.header),
        ticks.view(np.uint8).data,
        inputs.view(np.uint8).data,
    ]


def _array(frame: Frame, dtype: type[np.generic]) -> NDArray[Any]:
    """The numbers in a frame; copied only where their place in memory is odd."""
    if len(frame) == 0:
        return np.zeros(0, dtype)
    numbers = np.frombuffer(frame, np.dtype(dtype).newbyteorder("<"))
    numbers = numbers.astype(dtype, copy=False)
    return numbers if numbers.flags.aligned else numbers.copy()


def _table(frame: Frame) -> Mapping[str, Any]:
    try:
        text = bytes(frame).decode()
        table = json.loads(text, object_pairs_hook=_once_each, parse_constant=_no_number)
    except (ValueError, RecursionError) as error:
        raise MessageError(f"header is no JSON: {_short(error)}") from None
    if not isinstance(table, dict):
        raise MessageError("header is no JSON object")
    return table


def _once_each(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    table = dict(pairs)
    if len(table) != len(pairs):
        raise ValueError("a key is given twice")
    return table


def _no_number(text: str) -> None:
    raise ValueError(f"{text} is no number")


def _value(table: Mapping[str, Any], key: str) -> Any:
    if key not in table:
        raise MessageError(f"{key} is missing")
    return table[key]


def _whole(table: Mapping[str, Any], key: str, least: int, most: int) -> int:
    value = _value(table, key)
    if type(value) is not int or not least <= value <= most:
        raise MessageError(
            f"{key} is {_shown(value)}; right would be a whole number from {least} to {most}"
        )
    return value


def _name(table: Mapping[str, Any], key: str) -> str:
    value = _value(table, key)
    right = isinstance(value, str) and 0 < len(value) <= NAME_LENGTH and value.isprintable()
    if not right:
        raise MessageError(
            f"{key} is {_shown(value)}; right would be a text of 1 to {NAME_LENGTH} letters"
        )
    return str(value)


def _converted(table: Mapping[str, Any], key: str, convert: Callable[[str], Any]) -> Any:
    value = _value(table, key)
    if not isinstance(value, str) or len(value) > TEXT_LENGTH:
        raise MessageError(f"{key} is {_shown(value)}; right would be a short text")
    try:
        return convert(value)
    except (ValueError, OverflowError) as error:
        raise MessageError(f"{key} is {_shown(value)}; right would be {_short(error)}") from None


@lru_cache(maxsize=64)
def _tick(text: str) -> Fraction:
    if _LARGE_EXPONENT.search(text):
        raise ValueError('a shorter number, as in "1 ps"')
    tick = check_tick(parse_time(text))
    if tick < 1:  # tags at the end of an interval would be rounded out of it
        raise ValueError("a tick of at least 1 ps")
    return tick


@lru_cache(maxsize=64)
def _utc(text: str) -> str:
    parse_utc(text)
    return text


def _shown(value: Any) -> str:
    """A found value for a reason: short, and safe to print."""
    try:
        return _short(value if isinstance(value, str) else json.dumps(value))
    except (ValueError, RecursionError):
        return "out of all bounds"


def _short(value: object) -> str:
    text = str(value)[:NAME_LENGTH].encode("unicode_escape").decode()
    return text if len(text) <= TEXT_LENGTH else text[: TEXT_LENGTH - 3] + "..."
