"""`gainwright draft`: a rig file to start from."""

from pathlib import Path

import click


@click.command(short_help="A rig file to start from, out of one log.")
@click.argument("run", type=click.Path(path_type=Path))
@click.option(
    "--out", type=click.Path(path_type=Path), help="The rig file to write [default: rig.toml beside the log]."
)
def draft(run: Path, out: Path | None) -> int:
    """Guess the columns, units and roles of a log, and write them down for a person to confirm.

    Every guess carries `guessed = true`, which holds the job until you remove it. Nothing is ever overwritten.
    """
    from ..drafting.draft import draft_rig, write_draft

    rig_file = run.parent / "rig.toml" if out is None else out
    text = draft_rig(run, rig_file)
    write_draft(text, rig_file)
    click.echo(f"{rig_file}: {_marks(text)} guesses to confirm")
    click.echo("look at each, put it right, remove its mark; then: gainwright process " + str(rig_file))
    return 0


def _marks(text: str) -> int:
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    return sum("guessed = true" in line for line in lines)
