"""JSON that any program reads."""

from __future__ import annotations

import json
from math import inf, nan

import numpy as np
import pytest

from tagstream.outputs.plain_json import as_bytes


def test_numbers_are_finite_all_the_way_down() -> None:
    value = {"a": [1.5, nan, (inf,)], "b": np.float64(-inf), "c": np.array([1.0, nan]), "d": True}
    told = json.loads(as_bytes(value))
    assert told == {"a": [1.5, None, [None]], "b": None, "c": [1.0, None], "d": True}


def test_integers_and_texts_stay_as_they_are() -> None:
    value = {"n": 2**62 + 1, "i": np.int64(2**53 + 1), "µ": "g²", "broken": "\ud800"}
    told = json.loads(as_bytes(value))
    assert told == {"n": 2**62 + 1, "i": 2**53 + 1, "µ": "g²", "broken": "?"}


def test_what_is_no_plain_value_is_refused() -> None:
    with pytest.raises(TypeError):
        as_bytes({"a": object()})
