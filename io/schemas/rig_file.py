"""The JSON Schema of a rig file, for editors and for programs that write one; TOML has the same tables and keys."""

from typing import Any

from ..rigfile.schema import RigFile

DIALECT = "https://json-schema.org/draft/2020-12/schema"
_FREE = {"const": "not limited", "description": "nothing can be harmed"}


def rig_file_schema() -> dict[str, Any]:
    """The shape of a rig file. Units, files and what fits together are checked when the file is read.

    Returns
    -------
    dict
        Of JSON values.
    """
    shape = RigFile.model_json_schema(by_alias=True, mode="validation")
    parts = shape["$defs"]
    for name in ("command", "command_rate", "response", "response_rate"):
        _allow(parts["LimitsPart"]["properties"], name, _FREE)
    for name in ("command", "setpoint"):
        _allow(parts["RunSignals"]["properties"], name, {"const": False, "description": "not in this log"})
    # where no run is a log in time, a plant or frequency tables stand in, and the loader takes the signals as given
    parts["Signals"]["required"] = [name for name in parts["Signals"]["required"] if name != "time"]
    title = {"$schema": DIALECT, "title": "gainwright rig file"}
    return {**title, **{key: value for key, value in shape.items() if key != "title"}}


def _allow(properties: dict[str, Any], name: str, word: dict[str, Any]) -> None:
    """The file may hold this instead of the table."""
    given = properties[name]
    kept = {key: given.pop(key) for key in ("default", "title", "examples") if key in given}
    properties[name] = {"anyOf": [*given.get("anyOf", [given]), word], **kept}
