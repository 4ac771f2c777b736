"""`gainwright recheck`: holds an earlier sheet's model, or a ladder rung, against fresh measurements."""

import json
from pathlib import Path

import click


@click.command(short_help="Hold an earlier sheet, or a ladder rung, against fresh measurements.")
@click.argument("sheet", type=click.Path(path_type=Path))
@click.argument("runs", metavar="RUN...", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option(
    "--rig", type=click.Path(path_type=Path), help="Read the logs as this rig file says [default: the sheet's]."
)
@click.option("--rung", type=int, help="The runs were taken on this rung of the sheet's ladder, in closed loop.")
@click.option(
    "--setpoint", metavar="SOURCE", help="With --rung: where the log holds the setpoint, in the response's unit."
)
@click.option("--json", "as_json", is_flag=True, help="Print the answer as JSON, for programs.")
def recheck(
    sheet: Path, runs: tuple[Path, ...], rig: Path | None, rung: int | None, setpoint: str | None, as_json: bool
) -> int:
    """Say whether SHEET (a gains.json) is still valid, drifting or no longer valid, by fresh open-loop RUNs.

    With several runs of three dates or more (`taken` in the rig file, else when the file was last changed) each
    parameter's drift is told. With --rung: climb, repeat or stop.

    Exit codes: 0 still agrees (--rung: climb), 3 not so, 2 the call is wrong, 4 a log can't be used.
    """
    from ..progress import shown_progress
    from ..recheck_text import advice_of, rung_row, rung_text, sheet_row, sheet_text
    from ..rechecking import recheck_rung, recheck_sheet

    if rung is not None:
        with shown_progress() as progress:
            found = recheck_rung(sheet, rung, runs, rig, setpoint, progress)
        click.echo(json.dumps(rung_row(rung, found), indent=2) if as_json else rung_text(rung, found))
        return 0 if advice_of(found) == "climb" else 3
    with shown_progress() as progress:
        checked = recheck_sheet(sheet, runs, rig, progress)
    click.echo(json.dumps(sheet_row(checked), indent=2) if as_json else sheet_text(checked))
    return 0 if checked.verdict in ("valid", "drifting") else 3
