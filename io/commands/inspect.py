"""`gainwright inspect`: what is in a log and what is wrong with it."""

from pathlib import Path

import click


@click.command(short_help="What is in a log and what is wrong with it.")
@click.argument("runs", metavar="RUN...", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--rig", type=click.Path(path_type=Path), help="Read the logs as this rig file says.")
def inspect(runs: tuple[Path, ...], rig: Path | None) -> int:
    """Show the channels of each log with their units, extremes and lost samples, and every finding.

    Exit codes: 0 usable, 3 a finding would hold a job, 4 a log can't be used.
    """
    from ...ident.errors import RecordError
    from ..inspection import inspect_log, inspect_run
    from ..rigfile.load import load_rig

    read_as = None if rig is None else load_rig(rig)
    grave = set()
    for run in runs:
        try:
            found = (inspect_log(run),) if read_as is None else inspect_run(run, read_as)
        except RecordError as error:
            click.echo(error.text, err=True)
            grave.add("stops")
            continue
        for each in found:
            click.echo(each.text)
            grave |= {finding.refuses for finding in each.findings}
    return 4 if "stops" in grave else 3 if "holds" in grave else 0
