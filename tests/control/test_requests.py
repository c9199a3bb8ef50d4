"""What may be asked, and how a wrong request is told."""

from __future__ import annotations

import contextlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.control.requests import (
    BadRequestError,
    MarkRequest,
    PlainRequest,
    as_message,
    mark_request,
    parsed,
)
from tagstream.marks import KEY_BYTES, TEXT_BYTES


@pytest.mark.parametrize("name", ["status", "new-run", "restart-spans", "stop"])
def test_requests_that_need_their_name_alone(name: str) -> None:
    assert parsed(b'{"request": "%s"}' % name.encode()) == PlainRequest(request=name)  # type: ignore[arg-type]


@pytest.mark.parametrize("value", [1.5, -3.0, 0.0, "HV", "", "1"])
def test_a_mark_keeps_numbers_and_texts_apart(value: float | str) -> None:
    mark = mark_request("stage", value, 7)
    assert parsed(as_message(mark)) == mark
    assert type(mark.value) is type(value)


def test_a_whole_number_is_a_number() -> None:
    mark = parsed(b'{"request": "mark", "key": "n", "value": 12}')
    assert isinstance(mark, MarkRequest)
    assert (mark.value, type(mark.value), mark.at_ps) == (12.0, float, None)


WRONG = [
    (b"", "no JSON"),
    (b"\xff\xfe", "no JSON"),
    (b"[" * 60_000, "no JSON"),
    (b"null", '"request": "status", '),
    (b"[]", 'or "mark"'),
    (b"{}", 'an object with "request"'),
    (b'{"request": "reload"}', 'an object with "request"'),
    (b'{"request": ["stop"]}', 'an object with "request"'),
    (b'{"request": "stop", "path": "/etc"}', 'path: unknown key of "stop"; known are request'),
    (b'{"request": "mark"}', "key: missing"),
    (b'{"request": "mark", "key": "a"}', "value: missing"),
    (b'{"request": "mark", "key": 3, "value": 1}', "key: right would be a text"),
    (b'{"request": "mark", "key": "a", "value": true}', "value: right would be a number or"),
    (b'{"request": "mark", "key": "a", "value": null}', "value: right would be a number or"),
    (b'{"request": "mark", "key": "a", "value": [1]}', "value: right would be a number or"),
    (b'{"request": "mark", "key": "a", "value": NaN}', "right would be finite"),
    (b'{"request": "mark", "key": "a", "value": 1e999}', "right would be finite"),
    (b'{"request": "mark", "key": "a", "value": ' + b"9" * 400 + b"}", "right would be finite"),
    (b'{"request": "mark", "key": "a", "value": ' + b"9" * 5000 + b"}", "no JSON"),
    (b'{"request": "mark", "key": "a/b", "value": 1}', "without / or control"),
    (b'{"request": "mark", "key": "", "value": 1}', f"1 to {KEY_BYTES} bytes"),
    (b'{"request": "mark", "key": "a", "value": "%s"}' % (b"x" * 65), f"at most {TEXT_BYTES}"),
    (b'{"request": "mark", "key": "a", "value": "\\ud800"}', "no JSON"),
    (b'{"request": "mark", "key": "a", "value": 1, "at_ps": -1}', "at_ps: right would be stream"),
    (b'{"request": "mark", "key": "a", "value": 1, "at_ps": 1.5}', "at_ps: right would be"),
    (b'{"request": "mark", "key": "a", "value": 1, "at_ps": 99999999999999999999}', "at_ps: right"),
    (b'{"request": "mark", "key": "a", "value": 1, "folder": "/"}', "folder: unknown key"),
]


@pytest.mark.parametrize(("text", "words"), WRONG, ids=range(len(WRONG)))
def test_what_is_wrong_is_told(text: bytes, words: str) -> None:
    with pytest.raises(BadRequestError) as told:
        parsed(text)
    assert words in str(told.value)


def test_what_is_wrong_with_a_mark_is_told_before_it_is_sent() -> None:
    with pytest.raises(BadRequestError, match="without /"):
        mark_request("a/b", 1.0)
    with pytest.raises(BadRequestError, match="at_ps: right would be"):
        mark_request("a", 1.0, -1)


@given(st.binary(max_size=200) | st.text(alphabet='{}[]":,0123456789.e-naulmrk ').map(str.encode))
def test_any_bytes_are_a_request_or_wrong(text: bytes) -> None:
    with contextlib.suppress(BadRequestError):
        assert parsed(text).request in ("status", "new-run", "restart-spans", "stop", "mark")
