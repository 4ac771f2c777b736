"""`gainwright process`: the whole job, from a rig file to a gain sheet with its dossier and report."""

from pathlib import Path

import click


@click.command(short_help="The whole job: gain sheet, dossier and report.")
@click.argument("rigfile", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path), help="Output folder [default: out/ beside the rig file].")
@click.option("--no-report", is_flag=True, help="Leave out report.html.")
def process(rigfile: Path, out: Path | None, no_report: bool) -> int:
    """Read the logs that RIGFILE names, fit the plant, choose gains, compare them with the held-out run.

    Writes gains.json (the gain sheet), dossier.h5 (every number behind it) and report.html.
    """
    from ..deliver import deliver
    from ..progress import shown_progress
    from ..terminal import verdict_text
    from .output import print_coloured

    folder = rigfile.parent / "out" if out is None else out
    with shown_progress() as progress:
        outcome = deliver(rigfile, folder, with_report=not no_report, progress=progress)
    print_coloured(lambda width, colour: verdict_text(outcome, width, colour=colour))
    click.echo(f"written to {folder}")
    return 0 if outcome.status == "released" else 3
