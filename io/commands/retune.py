"""`gainwright retune`: after a mechanical change, what changed, whether the old gains still do, and new gains."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from ..outcome import Outcome
    from ..progress import Progress


@click.command(short_help="After a mechanical change: what changed, and new gains.")
@click.argument("rigfile", type=click.Path(path_type=Path))
@click.option(
    "--before", required=True, metavar="SHEET", type=click.Path(path_type=Path), help="gains.json of before the change."
)
@click.option("--out", type=click.Path(path_type=Path), help="Output folder [default: out/ beside the rig file].")
@click.option("--no-report", is_flag=True, help="Leave out report.html.")
def retune(rigfile: Path, before: Path, out: Path | None, no_report: bool) -> int:
    """Process the fresh logs that RIGFILE names, and hold the plant and the gains of an earlier sheet beside them.

    Writes the same three files as `process`; what changed stands under `change` in gains.json.
    """
    from ..deliver import deliver
    from ..earlier import read_earlier
    from ..progress import shown_progress
    from ..second_process import second_process
    from .process import _print_verdict

    earlier = read_earlier(before)
    folder = rigfile.parent / "out" if out is None else out

    def finish(outcome: "Outcome", progress: "Progress") -> "Outcome":
        from ..retuning import retuned

        return retuned(outcome, earlier, progress)

    with second_process() as aside, shown_progress() as progress:
        outcome = deliver(rigfile, folder, with_report=not no_report, progress=progress, finish=finish, aside=aside)
    _print_verdict(outcome)
    click.echo(f"written to {folder}")
    return 0 if outcome.status == "released" else 3
