"""The verb `keys`."""

from __future__ import annotations

import json
from pathlib import Path

import click

from tagstream.cli.options import json_option


@click.command()
@click.argument("folder", type=click.Path(path_type=Path))
@json_option
def command(folder: Path, as_json: bool) -> None:
    """Make keys in FOLDER: a pair for the side that binds, one for the side that connects.

    Keys that are there already are never replaced.
    """
    from tagstream.security import make_keys
    from tagstream.security.keys import CLIENT, SERVER

    files = make_keys(folder.expanduser().absolute())
    described = {
        files.private(SERVER): "private key of the side that binds; it stays on that machine",
        files.public(SERVER): "its public key; those who connect need it (server_key)",
        files.private(CLIENT): "private key of the side that connects; move it to that machine",
        files.public(CLIENT): "its public key",
        files.authorised_client: "the same: whose public key lies in this folder may come in",
    }
    if as_json:
        click.echo(json.dumps({str(path): text for path, text in described.items()}, indent=2))
        return
    width = max(len(str(path)) for path in described)
    for path, text in described.items():
        click.echo(f"{path!s:<{width}}  {text}")
    for line in (
        "",
        "# settings of the side that binds",
        "[security]",
        f"keys = {_toml(files.folder)}",
        f"authorised = {_toml(files.authorised)}",
        "",
        "# settings of a side that connects; the paths are those on its machine",
        "[feed]",
        f"server_key = {_toml(files.public(SERVER))}",
        "[security]",
        f"keys = {_toml(files.folder)}",
    ):
        click.echo(line)


def _toml(path: Path) -> str:
    return json.dumps(str(path), ensure_ascii=False)
