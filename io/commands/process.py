"""`gainwright process`: the whole job, from a rig file to a gain sheet with its dossier and report."""

import gc
import os
import shutil
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from ..outcome import Outcome
    from ..progress import Progress


@click.command(short_help="The whole job: gain sheet, dossier and report.")
@click.argument("rigfile", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path), help="Output folder [default: out/ beside the rig file].")
@click.option("--no-report", is_flag=True, help="Leave out report.html.")
@click.option("--pictures", type=click.Path(path_type=Path), help="Also write each picture as SVG and PNG to a folder.")
@click.option(
    "--wish", "wishes", multiple=True, metavar="POLE",
    help='Ask for a closed-loop pole: "-3+4j" (1/s), "damping 0.6, frequency 5 rad/s" or "overshoot 10 %, peak 0.5 s". '
    "May be given again.",
)  # fmt: skip
@click.option("--json", "as_json", is_flag=True, help="Print the gain sheet instead of the verdict, for programs.")
@click.option("-v", "--verbose", is_flag=True, help="Show the working too: vector lengths, controllers tried.")
def process(
    rigfile: Path,
    out: Path | None,
    no_report: bool,
    pictures: Path | None,
    wishes: tuple[str, ...],
    as_json: bool,
    verbose: bool,
) -> int:
    """Read the logs that RIGFILE names, fit the plant, choose gains, compare them with the held-out run.

    Writes gains.json (the gain sheet), dossier.h5 (every number behind it) and report.html.
    """
    gc.set_threshold(100_000, 50, 50)  # a short process with many small values and hardly a cycle among them
    from ..deliver import deliver
    from ..picture_files import write_pictures
    from ..progress import shown_progress
    from ..second_process import second_process
    from ..wish import read_wish

    asked = [read_wish(text) for text in wishes]
    folder = rigfile.parent / "out" if out is None else out

    def finish(outcome: "Outcome", progress: "Progress") -> "Outcome":
        from ..wishing import with_wishes

        return with_wishes(outcome, asked) if asked else outcome

    with second_process() as aside, shown_progress() as progress:
        outcome = deliver(rigfile, folder, with_report=not no_report, progress=progress, aside=aside, finish=finish)
        if pictures is not None:
            write_pictures(outcome, pictures, progress)
    if as_json:
        _print_sheet(outcome)
    else:
        _print_verdict(outcome)
        if verbose:
            _print_working(outcome)
        click.echo(f"written to {folder}" + (f", pictures to {pictures}" if pictures is not None else ""))
    return 0 if outcome.status == "released" else 3


def _print_sheet(outcome: "Outcome") -> None:
    """The very text of gains.json."""
    from ..sheet import sheet_bytes, sheet_of

    click.echo(sheet_bytes(sheet_of(outcome)).decode(), nl=False)


def _print_working(outcome: "Outcome") -> None:
    from ..terminal_working import working_text

    click.echo(f"\n{working_text(outcome)}\n")


def _print_verdict(outcome: "Outcome") -> None:
    """In colour on a terminal only, and never where NO_COLOR is set."""
    from ..terminal import verdict_text

    colour = sys.stdout.isatty() and "NO_COLOR" not in os.environ
    click.echo(verdict_text(outcome, shutil.get_terminal_size((100, 40)).columns, colour=colour))
