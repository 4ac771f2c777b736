"""`gainwright watch`: each completed run in a folder is processed as it appears."""

import signal
import threading
from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from ..plugin.jobs import Done


@click.command(short_help="Processes each completed run as it appears in a folder.")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--rig", required=True, type=click.Path(path_type=Path), help="The rig file.")
@click.option("--out", type=click.Path(path_type=Path), help="For results [default: out/ beside the rig file].")
@click.option("--pattern", help='Names of runs, such as "*.csv" [default: every suffix that can be read].')
@click.option("--quiet", default=3.0, show_default=True, help="Seconds for which a complete run has not changed.")
@click.option("--every", default=1.0, show_default=True, help="Seconds between two scans.")
@click.option("--once", is_flag=True, help="End when every run that is there has been done.")
@click.option("--no-report", is_flag=True, help="Leave out report.html.")
def watch(
    folder: Path,
    rig: Path,
    out: Path | None,
    pattern: str | None,
    quiet: float,
    every: float,
    once: bool,
    no_report: bool,
) -> int:
    """Process each completed run of FOLDER with the rig file, once.

    A run that a [[runs]] table of the rig file names (by a pattern) is used as that table says; any other one is a
    fresh held-out run. Results are in OUT/NAME OF THE RUN/. A run that was stopped early is not tuned from.

    Ends with Control-C (130), with SIGTERM or with --once: then with the gravest exit code of its runs.
    """
    from ..plugin.jobs import gravest
    from ..plugin.watching import Watch
    from ..plugin.watching import watch as watch_folder
    from ..rigfile.load import load_rig
    from ..rigfile.waiting import waits_for_runs

    waits_for_runs(lambda: load_rig(rig), lambda said: click.echo(said, err=True))
    stop = threading.Event()
    signal.signal(signal.SIGTERM, lambda number, frame: stop.set())
    asked = Watch(
        folder, rig.resolve(), rig.parent / "out" if out is None else out, pattern, quiet, every, once, not no_report
    )
    click.echo(f"watching {folder}; results go to {asked.out}", err=True)
    return gravest(watch_folder(asked, lambda said: click.echo(said, err=True), _tell, stop))


def _tell(done: "Done") -> None:
    said = "".join(f"\n  {line}" for line in done.said.splitlines())
    what = f" ({done.plant}; {done.controller})" if done.controller else ""
    click.echo(f"{done.label}: {done.status}{what}, {done.seconds:.1f} s, {done.folder}{said}")
