"""Every broken input: what was good is delivered, then one clear message."""

from __future__ import annotations

from pathlib import Path

import pytest

from tagstream.errors import TagstreamError
from tagstream.feeds import Arrivals
from tests.feeds.opened import opened, tags_of
from tests.hostile import HOSTILE, HostileInput


@pytest.mark.parametrize("hostile", HOSTILE, ids=lambda hostile: str(hostile.name))
def test_what_is_good_is_delivered_then_one_message(hostile: HostileInput, tmp_path: Path) -> None:
    table = hostile.table(tmp_path)
    got: list[Arrivals] = []
    with pytest.raises(TagstreamError) as caught:
        got.extend(opened(table).pieces())  # keeps what came before the error
    message = str(caught.value)
    assert [word for word in hostile.words if word not in message] == [], message
    assert "\n" not in message
    assert len(tags_of(got)) == hostile.good_tags
    assert caught.value.exit_code == hostile.exit_code
    if hostile.exit_code == 3:
        assert message.startswith(str(tmp_path))


def test_names_are_unique() -> None:
    names = [hostile.name for hostile in HOSTILE]
    assert len(set(names)) == len(names)
