"""`gainwright batch`: many jobs, on this machine or on a cluster."""

import os
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from ..plugin.jobs import Done


@click.command(short_help="Many jobs, on this machine or on a cluster.")
@click.argument("rigfiles", metavar="RIGFILE...", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--workers", type=click.IntRange(1), help="Processes on this machine [default: one a core].")
@click.option("--scheduler", metavar="ADDRESS", help="Of a dask.distributed cluster that sees the same files.")
@click.option("--out", default="batch", show_default=True, type=click.Path(path_type=Path), help="For the overview.")
@click.option("--no-report", is_flag=True, help="Leave out each job's report.html.")
def batch(rigfiles: tuple[Path, ...], workers: int | None, scheduler: str | None, out: Path, no_report: bool) -> int:
    """Process every RIGFILE; the results go to out/ beside each, or out/NAME/ where several stand side by side.

    Writes overview.html and batch.json to the folder OUT. A batch that was interrupted or killed goes on where it was
    when it is given again. Ends with the gravest exit code of its jobs.
    """
    from ..plugin.batching import batch as batch_rigs
    from ..plugin.batching import cluster, processes
    from ..plugin.jobs import gravest
    from ..progress import shown_progress

    executors = processes(workers or os.cpu_count() or 1) if scheduler is None else cluster(scheduler)
    with shown_progress() as progress:

        def ended(done: "Done", count: int, asked: int) -> None:
            progress(f"{count} of {asked} done; last {done.label}: {done.status}", count / asked)

        finished = batch_rigs(rigfiles, out.resolve(), executors, ended, with_report=not no_report)
    _print_table(finished)
    click.echo(f"written to {out}")
    return gravest([done.code for done in finished])


def _print_table(finished: "Sequence[Done]") -> None:
    """One line a job, then how many of each kind there are."""
    from collections import Counter

    width = max(len(_shown(done)) for done in finished)
    for done in finished:
        first = done.said.splitlines()[0] if done.said else f"{done.plant}; {done.controller}"
        click.echo(f"{done.status:<14}{_shown(done):<{width}}  {first}")
    counts = Counter(done.status for done in finished)
    click.echo(", ".join(f"{count} {status}" for status, count in sorted(counts.items())))


def _shown(done: "Done") -> str:
    return os.path.relpath(done.label) if os.path.isabs(done.label) else done.label
