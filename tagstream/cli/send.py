"""The verb `send`."""

from __future__ import annotations

import json
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

import click

from tagstream.cli.options import json_option

if TYPE_CHECKING:
    from tagstream.sending.play import Sent

_FILE = click.Path(path_type=Path)


@click.command()
@click.argument("recordings", metavar="RECORDING...", nargs=-1, required=True, type=_FILE)
@click.argument("address")
@click.option(
    "--pace",
    type=click.FloatRange(min=0, min_open=True),
    help="Stream seconds per second of wall time; absent: 1.",
)
@click.option("--fast/--no-fast", default=False, help="As fast as the receiver takes it.")
@click.option("--repeat", type=click.IntRange(min=1), default=1, help="How often to play it.")
@click.option("--records", metavar="SETTINGS", type=_FILE, help="Describe records by its [feed].")
@click.option("--bind/--no-bind", default=False, help="Wait at ADDRESS, do not call it.")
@click.option("--pub/--no-pub", default=False, help="To all who subscribe; else one pulls.")
@click.option("--stream", default="tagstream", show_default=True, help="Name in the messages.")
@click.option("--security", metavar="FOLDER", type=_FILE, help="Keys, made by `tagstream keys`.")
@click.option("--server-key", metavar="FILE", type=_FILE, help="Public key of who binds ADDRESS.")
@json_option
def command(
    recordings: tuple[Path, ...],
    address: str,
    pace: float | None,
    fast: bool,
    repeat: int,
    records: Path | None,
    bind: bool,
    pub: bool,
    stream: str,
    security: Path | None,
    server_key: Path | None,
    as_json: bool,
) -> None:
    """Play RECORDING, or the segments of one run, to ADDRESS.

    \b
    tcp://HOST:PORT, ipc://PATH   messages over ZeroMQ
    HOST:PORT                     described records over TCP; needs --records
    -                             described records on standard output; needs --records
    """
    from tagstream.sending.opening import Target, open_player
    from tagstream.sending.play import Conductor
    from tagstream.service import StopRequest

    if fast and pace is not None:
        raise click.UsageError("--fast and --pace exclude each other")
    stop = StopRequest()
    stop.install()
    target = Target(address, bind, pub, stream, records, security, server_key)
    conductor = Conductor(None if fast else pace or 1.0, stop.wait)
    player = open_player(recordings, target, conductor, lambda: stop.requested)
    try:
        player.play(repeat)
    finally:
        _report(player.sent, as_json, to_stderr=address == "-")
    if stop.requested:
        raise SystemExit(stop.exit_code)


def _report(sent: Sent, as_json: bool, to_stderr: bool) -> None:
    """What was sent; beside the records where they go to standard output."""
    if as_json:
        click.echo(json.dumps(asdict(sent), indent=2), err=to_stderr)
        return
    counts = ", ".join(f"{count} {name.replace('_', ' ')}" for name, count in sent.counts.items())
    rate = sent.counts.get("tags", 0) / sent.seconds / 1e6 if sent.seconds else 0.0
    click.echo(
        f"{counts or 'nothing'}; {sent.stream_s:g} s of stream in {sent.seconds:.2f} s,"
        f" {rate:.3g} million tags a second",
        err=to_stderr,
    )
