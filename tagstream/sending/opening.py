"""From what a person asks for to a player that is ready."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from tagstream.errors import SettingsError
from tagstream.feeds.recorded import RecordingsFeed
from tagstream.feeds.sessions import parse_utc
from tagstream.security.keys import KeyFiles
from tagstream.sending import Line
from tagstream.sending.encoding import RecordEncoder
from tagstream.sending.messages_line import MessagesLine, Place, SessionNames
from tagstream.sending.play import Conductor, Player
from tagstream.sending.portions import portions
from tagstream.sending.records_line import Outlet, RecordsLine, StandardOutput, TcpOutlet
from tagstream.settings import load_settings
from tagstream.settings.feeds import RecordLayout
from tagstream.settings.sections import Security
from tagstream.units import PS_PER_S

STANDARD_OUTPUT = "-"


@dataclass(frozen=True, slots=True)
class Target:
    """Where a recording is sent to, and how.

    address: of ZeroMQ with its transport; a host and a port, or "-", for records. records: the
    settings file whose [feed] describes them. keys: the folder that `tagstream keys` made, for
    ZeroMQ; when binding, who has a key in its folder `authorised` may come in. server_key: the
    public key of the peer, when connecting.
    """

    address: str
    bind: bool = False
    publish: bool = False
    stream: str = "tagstream"
    records: Path | None = None
    keys: Path | None = None
    server_key: Path | None = None

    @property
    def takes_messages(self) -> bool:
        """Whether messages go there; else records."""
        return "://" in self.address

    def check(self) -> None:
        """Raise SettingsError for what does not go together."""
        problems = list(self._problems())
        if problems:
            raise SettingsError(problems)

    def _problems(self) -> list[str]:
        only_messages = {
            "--pub": self.publish,
            "--security": self.keys is not None,
            "--server-key": self.server_key is not None,
        }
        if self.takes_messages:
            right = "only for records, to HOST:PORT or -"
            return [] if self.records is None else [f"--records: {right}, not {self.address}"]
        right = "only for messages, to an address such as tcp://127.0.0.1:5570"
        found = [f"{name}: {right}" for name, given in only_messages.items() if given]
        if self.records is None:
            found.append(
                f"{self.address}: records go there; give --records SETTINGS, a file whose [feed]"
                " describes them, or an address of ZeroMQ such as tcp://127.0.0.1:5570"
            )
        if self.address == STANDARD_OUTPUT and self.bind:
            found.append("--bind: not with standard output")
        return found


def open_player(
    recordings: Sequence[Path], target: Target, conductor: Conductor, stopped: Callable[[], bool]
) -> Player:
    """A player of the segments of one run.

    Raises SettingsError or InputError for what cannot be used.
    """
    target.check()
    feed = RecordingsFeed(recordings, PS_PER_S)
    if not target.takes_messages:
        open_line = _records_line(target, stopped)
        return Player(lambda: portions(feed.pieces()), open_line, conductor)
    place = Place(
        target.address, target.bind, target.publish, _security(target.keys), target.server_key
    )

    def messages_line(session: int) -> Line:
        utc = _with_offset(feed.time_base.origin_utc) if session == 0 else None
        return MessagesLine(place, SessionNames(target.stream, utc), stopped)

    return Player(lambda: portions(feed.pieces()), messages_line, conductor)


def _security(folder: Path | None) -> Security | None:
    if folder is None:
        return None
    return Security.model_validate({"keys": folder, "authorised": KeyFiles(folder).authorised})


def _records_line(target: Target, stopped: Callable[[], bool]) -> Callable[[int], Line]:
    layout = _layout(target.records) if target.records is not None else None
    if layout is None:
        raise SettingsError(["--records: right would be a settings file"])
    RecordEncoder(layout)  # what is wrong with it comes out before anybody waits

    def outlet(session: int) -> Outlet:
        if target.address != STANDARD_OUTPUT:
            return TcpOutlet(target.address, target.bind, stopped)
        return StandardOutput(stopped)

    return lambda session: RecordsLine(outlet(session), RecordEncoder(layout))


def _layout(path: Path) -> RecordLayout:
    feed = load_settings(path).settings.feed
    if not isinstance(feed, RecordLayout):
        raise SettingsError(
            [
                f'{path}: [feed] kind: found "{feed.kind}"; right would be one that describes'
                " records: records, tcp, stdin"
            ]
        )
    return feed


def _with_offset(utc: str | None) -> str | None:
    """A wall time that a message may carry; None where the recording knows none."""
    try:
        return None if utc is None else str(parse_utc(utc).isoformat())
    except ValueError:
        return None
