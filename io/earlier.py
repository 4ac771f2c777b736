"""An earlier gain sheet as a value: its plant, its gains, and what was asked of them."""

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from ..design.gains import Gains
from ..ident.errors import RequestError
from ..ident.known import Known
from ..ident.law import Clamp, Law
from ..ident.noise import effective_samples
from ..ident.plant import Plant
from ..ident.whiten import Colour

SCHEMA = "gainwright.gain-sheet/1"


@dataclass(frozen=True, eq=False)
class Earlier:
    """An earlier sheet.

    Attributes
    ----------
    file : Path
    sha256 : str
        Of its bytes.
    sheet : dict
        As read.
    known : Known
        Its plant.
    gains : Gains
    law : Law or None
    operating_command, operating_command_error, operating_response : float
    released : bool
        False: its gains stood under `candidate`.
    """

    file: Path
    sha256: str
    sheet: dict[str, Any]
    known: Known
    gains: Gains
    law: Law | None
    operating_command: float
    operating_command_error: float
    operating_response: float
    released: bool

    @property
    def trail(self) -> dict[str, Any]:
        """How a later sheet refers to it."""
        created = self.sheet.get("provenance", {}).get("created")
        return {"file": str(self.file), "sha256": self.sha256, "created": created, "status": self.sheet["status"]}


def read_earlier(path: Path) -> Earlier:
    """Read a gain sheet.

    Raises
    ------
    RequestError
        When it can't be read, is no gain sheet, or holds no gains.
    """
    content = _bytes(path)
    sheet = _sheet(path, content)
    try:
        chosen = sheet["controller"] or (sheet.get("candidate") or {}).get("controller")
        if chosen is None or sheet["plant"] is None:
            raise _refused(path, "this sheet holds no gains", "neither controller nor candidate", "a sheet with gains")
        point = sheet["operating_point"]
        low, high = point["command"]["interval_95"]
        return Earlier(
            path.resolve(),
            hashlib.sha256(content).hexdigest(),
            sheet,
            _known(sheet["plant"]),
            gains_of_row(chosen),
            law_of_row(chosen["difference_equation"]),
            float(point["command"]["value"]),
            (float(high) - float(low)) / 3.92,
            float(point["response"]["value"]),
            sheet["status"] == "released",
        )
    except (LookupError, TypeError, ValueError, AttributeError, ArithmeticError) as cause:
        found = f"{type(cause).__name__}: {cause}"
        raise _refused(path, "the sheet lacks something that a gain sheet has", found, "an unchanged sheet") from cause


def gains_of_row(row: dict[str, Any]) -> Gains:
    """Gains of a controller (or a rung) as the sheet prints it."""
    form = row["forms"]["parallel"] or row["forms"]["zero-pole"]
    values = {name: float(each["value"]) for name, each in form.items() if each is not None}
    return Gains(
        row["structure"],
        values.get("proportional", values.get("gain", 0.0)),
        values.get("integral", 0.0),
        values.get("derivative", 0.0),
        values.get("derivative_filter_time", 0.0),
        float(row["setpoint_weight"]),
        values.get("zero"),
        values.get("pole"),
        values.get("second_zero"),
        values.get("second_pole"),
    )


def law_of_row(row: dict[str, Any] | None) -> Law | None:
    """The difference equation; None for a continuous controller."""
    if row is None:
        return None
    clamp = row["clamp"]
    return Law(
        float(row["update_interval"]),
        _coefficients(row["command"]),
        _coefficients(row["setpoint"]),
        _coefficients(row["response"]),
        _coefficients(row["memory"]),
        Clamp(clamp["lowest"], clamp["highest"], clamp["rate"]),
    )


def _coefficients(row: list[Any]) -> tuple[float, ...]:
    return tuple(float(c) for c in row)


def _known(plant: dict[str, Any]) -> Known:
    names = tuple(plant["covariance"]["parameters"])
    parameters = plant["parameters"]
    return Known(
        plant["structure"],
        Plant(tuple(plant["numerator"]), tuple(plant["denominator"]), float(plant["dead_time"])),
        names,
        tuple(parameters[name]["unit"] for name in names),
        np.array([float(parameters[name]["value"]) for name in names]),
        np.array(plant["covariance"]["matrix"], dtype=float),
        _freedom(plant.get("noise"), len(names)),
    )


def _freedom(noise: dict[str, Any] | None, unknowns: int) -> float:
    """Independent samples behind the covariance; sheets that don't say count as large ones."""
    if not noise or not noise.get("samples"):
        return float("inf")
    colour = Colour(float(noise["rho"]), float(noise["c"]))
    return max(effective_samples(int(noise["samples"]), colour) - unknowns, 4.0)


def _bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as cause:
        raise _refused(path, "the earlier sheet can't be read", cause.strerror or str(cause), "a gains.json") from cause


def _sheet(path: Path, content: bytes) -> dict[str, Any]:
    try:
        sheet = json.loads(content)
    except (ValueError, RecursionError) as cause:
        raise _refused(path, "this is no gain sheet", f"no JSON: {cause}", "a gains.json of an earlier job") from cause
    schema = sheet.get("schema") if isinstance(sheet, dict) else None
    if schema != SCHEMA:
        raise _refused(path, "this is no gain sheet", f"schema {schema}", SCHEMA)
    return dict(sheet)


def _refused(path: Path, what: str, found: str, expected: str) -> RequestError:
    advice = "give the gains.json that an earlier job wrote"
    return RequestError(what, where=str(path), found=found, expected=expected, advice=advice)
