"""Where a result comes from: the program, its libraries, the rig file and the bytes of every record."""

import platform
from collections.abc import Sequence
from datetime import UTC, datetime
from importlib.metadata import version
from typing import Any

from .record import Source
from .rigfile.rig import Rig

_PACKAGES = ("numpy", "scipy", "pandas", "lmfit", "h5py", "pydantic", "pint", "matplotlib")


def provenance_of(rig: Rig, records: Sequence[Source]) -> dict[str, Any]:
    """The sheet's `provenance`: everything needed to make the same sheet again.

    Parameters
    ----------
    rig : Rig
    records : sequence of Source
        Logs, then frequency tables, each in the order of the rig file.
    """
    return {
        "gainwright": version("gainwright"),
        "python": platform.python_version(),
        "created": datetime.now(UTC).isoformat(timespec="seconds"),
        "rig_file": {"file": str(rig.file), "sha256": rig.sha256},
        "runs": [_trail(record) for record in records],
        "packages": {name: version(name) for name in _PACKAGES},
    }


def window_of(record: Source) -> list[float | None]:
    """[from, to) in s from the file's first sample; None where the window is open."""
    return [record.spec.from_s, record.spec.to_s]


def _trail(record: Source) -> dict[str, Any]:
    return {
        "file": record.spec.shown,
        "sha256": record.sha256,
        "window": window_of(record),
        "samples_sha256": record.samples_sha256,
        "use": record.spec.use,
    }
