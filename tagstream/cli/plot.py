"""The verb `plot`."""

from __future__ import annotations

from pathlib import Path

import click

from tagstream.cli.options import run_argument


@click.command()
@run_argument
@click.option(
    "--output",
    type=click.Path(path_type=Path),
    help="Folder for the pictures; absent: `pictures` in the run folder.",
)
@click.option(
    "--format",
    "formats",
    type=click.Choice(["png", "svg"]),
    multiple=True,
    default=["png", "svg"],
    show_default=True,
    help="Kind of picture; may be given twice.",
)
def command(run: Path, output: Path | None, formats: tuple[str, ...]) -> None:
    """Pictures of the histograms and of the history of each estimate of RUN."""
    from tagstream.outputs.reader import open_run
    from tagstream.plotting import plot_run

    folder = output or run.resolve() / "pictures"
    for path in plot_run(open_run(run), folder, formats):
        click.echo(str(path))
