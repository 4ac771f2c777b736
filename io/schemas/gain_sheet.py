"""The JSON Schema of the gain sheet, as it stands in the package."""

import json
from importlib.resources import files
from typing import Any


def gain_sheet_schema() -> dict[str, Any]:
    """The promised keys of a gain sheet with their types; further keys may be added, none of these goes."""
    schema = json.loads(files(__package__).joinpath("gain_sheet.json").read_text(encoding="utf-8"))
    assert isinstance(schema, dict)
    return schema
