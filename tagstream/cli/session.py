"""What `run` and `replay` show while a pipeline runs, and at its end."""

from __future__ import annotations

import json
import sys
import time
from contextlib import nullcontext
from pathlib import Path
from typing import Any

import click

from tagstream.errors import TagstreamError
from tagstream.launch import Plan, Started, started
from tagstream.pipeline import Pipeline
from tagstream.service import StopRequest, supervise
from tagstream.supervision.service_manager import ServiceManager
from tagstream.supervision.watch import Watch

BAR_LENGTH = 1000  # steps of the progress bar, which shows a fraction


def conduct(plan: Plan, as_json: bool) -> None:
    """Run `plan` to its end; print where the results are and what they say.

    Raises SystemExit with 128 + signal after a stop, and what the run raised.
    """
    stop, manager = StopRequest(), ServiceManager()
    stop.install()
    for text in plan.loaded.warnings:
        click.echo(f"warning: {text}", err=True)
    manager.starting()
    with started(plan, stop) as run:
        if not as_json:
            click.echo(f"results in {run.sinks.folder}")
        try:
            _look_after(plan, run, stop, manager)
        except TagstreamError:
            _report(run.sinks.folder, as_json)
            raise
        seconds = time.monotonic() - run.began_s
    if not as_json:
        click.echo(_speed(run.loop.pipeline.counters.received, seconds))
    _report(run.sinks.folder, as_json)
    if stop.requested:
        raise SystemExit(stop.exit_code)


def _look_after(plan: Plan, run: Started, stop: StopRequest, manager: ServiceManager) -> None:
    """Until the feed ends or a stop was asked for and everything is written."""
    with Watch(plan, run, stop, manager) as watch, _progress(run.loop.pipeline) as bar:
        counting = run.threads.counting.submit(run.loop.run_to_end, stop)
        supervise(counting, [watch.look, lambda: _advance(bar, run.loop.pipeline)])


def _report(folder: Path, as_json: bool) -> None:
    from tagstream.outputs.reader import open_run
    from tagstream.table import as_json as run_as_json
    from tagstream.table import format_run

    run = open_run(folder)
    click.echo(json.dumps(run_as_json(run), indent=2) if as_json else format_run(run))


def _speed(tags: int, seconds: float) -> str:
    rate = tags / seconds / 1e6
    return f"{tags} tags in {seconds:.2f} s, {rate:.3g} million tags a second"


def _progress(pipeline: Pipeline) -> Any:
    """A bar on a terminal, for a feed whose length is known."""
    if pipeline.feed.progress is None or not sys.stderr.isatty():
        return nullcontext()
    return click.progressbar(length=BAR_LENGTH, label="replaying", file=sys.stderr)


def _advance(bar: Any, pipeline: Pipeline) -> None:
    if bar is not None:
        done = int(BAR_LENGTH * (pipeline.feed.progress or 0.0))
        bar.update(done - bar.pos)
