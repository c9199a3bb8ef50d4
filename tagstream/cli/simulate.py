"""The verb `simulate`."""

from __future__ import annotations

import json
from pathlib import Path

import click

from tagstream.cli.options import Duration, json_option
from tagstream.units import PS_PER_S


@click.command()
@click.argument("scenario", type=click.Path(path_type=Path))
@click.argument("out", type=click.Path(path_type=Path))
@click.option("--seed", type=click.IntRange(min=0), default=1, show_default=True)
@click.option("--duration", type=Duration(), help="In place of the scenario's, such as 20 s.")
@json_option
def command(scenario: Path, out: Path, seed: int, duration: int | None, as_json: bool) -> None:
    """Make the recording OUT of simulated light after SCENARIO, with its known truth in it.

    The same scenario and seed give the same tags; a longer run begins with the shorter one.
    """
    from tagstream.service import StopRequest
    from tagstream.simulation.record import record_scenario
    from tagstream.simulation.scenario import load_scenario

    loaded = load_scenario(scenario)
    stop = StopRequest()
    stop.install()
    reached = [0]

    def after_piece(end_ps: int) -> bool:
        reached[0] = end_ps
        return stop.requested

    known = record_scenario(loaded, out, seed, duration, after_piece)
    if as_json:
        click.echo(json.dumps({"recording": str(out), "truth": known}, indent=2))
    else:
        click.echo(f"{out}: {reached[0] / PS_PER_S:g} s of {loaded.title or scenario.stem}; truth:")
        width = max(len(name) for name in known)
        for name, value in known.items():
            click.echo(f"  {name:<{width}}  {value}")
    if stop.requested:
        raise SystemExit(stop.exit_code)
