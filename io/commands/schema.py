"""`gainwright schema`: prints the JSON Schema of the rig file or of the gain sheet."""

import json

import click


@click.command(short_help="Print the JSON Schema of the rig file or of the gain sheet.")
@click.argument("what", type=click.Choice(["rig-file", "gain-sheet"]))
def schema(what: str) -> int:
    """Print the JSON Schema (draft 2020-12) of WHAT, for editors and for programs that read or write the file.

    The schema of the rig file describes its tables and keys; that units fit and files exist is checked by `process`.
    """
    from ..schemas.gain_sheet import gain_sheet_schema
    from ..schemas.rig_file import rig_file_schema

    found = rig_file_schema() if what == "rig-file" else gain_sheet_schema()
    click.echo(json.dumps(found, indent=2, ensure_ascii=False))
    return 0
