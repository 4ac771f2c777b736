"""`gainwright inspect`: what is in a log and what is wrong with it."""

import json
from pathlib import Path
from typing import Any

import click

SCHEMA = "gainwright.inspection/1"


@click.command(short_help="What is in a log and what is wrong with it.")
@click.argument("runs", metavar="RUN...", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--rig", type=click.Path(path_type=Path), help="Read the logs as this rig file says.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON value instead of lines, for programs.")
def inspect(runs: tuple[Path, ...], rig: Path | None, as_json: bool) -> int:
    """Show the channels of each log with their units, extremes and lost samples, and every finding.

    Exit codes: 0 usable, 3 a finding would hold a job, 4 a log can't be used.
    """
    from ...ident.errors import RecordError
    from ..inspection import inspect_log, inspect_run
    from ..rigfile.load import load_rig

    read_as = None if rig is None else load_rig(rig)
    usable: set[str] = set()
    logs: list[dict[str, Any]] = []
    for run in runs:
        try:
            found = (inspect_log(run),) if read_as is None else inspect_run(run, read_as)
        except RecordError as error:
            click.echo(error.text, err=True)
            usable.add("no")
            logs.append({"file": str(run), "usable": "no", "error": error.text})
            continue
        usable |= {each.usable for each in found}
        if as_json:
            logs += [{"file": str(run), **each.value, "error": None} for each in found]
        else:
            for each in found:
                click.echo(each.text)
    if as_json:
        click.echo(json.dumps({"schema": SCHEMA, "logs": logs}, indent=1, allow_nan=False))
    return 4 if "no" in usable else 3 if "holds" in usable else 0
