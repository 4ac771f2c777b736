"""Fit and design of an earlier job again, from its sheet and, where it stands beside it, its dossier."""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from ..design.continuous import stand_in_law
from ..design.designed import Design, Selection
from ..design.local_gain import with_local_gains
from ..design.requirements import ControllerSetting, Limits, Requirements
from ..design.situation import Situation, situation_of
from ..ident.bend import Bend
from ..ident.catalogue import CATALOGUE, Structure
from ..ident.errors import RequestError
from ..ident.fitted import Fit, Noise, Parameter, Plausible
from ..ident.given import STRUCTURE as GIVEN
from ..ident.known import plausible_of
from ..ident.plant import Plant
from ..ident.run import FloatArray
from .asked import asked_again
from .earlier import Earlier, law_of_row

_PLANTS = 1200
DOSSIER = "dossier.h5"


@dataclass(frozen=True, eq=False)
class Again:
    """An earlier job as far as a fresh record needs it.

    Attributes
    ----------
    fit : Fit
        Without its records.
    design : Design
        Gains, law, pole and the share of plants that met everything; no tables.
    requirements, limits, setting
        As asked then.
    from_dossier : bool
        The very plausible plants; else drawn again from parameters and covariance.
    """

    fit: Fit
    design: Design
    requirements: Requirements
    limits: Limits
    setting: ControllerSetting
    from_dossier: bool

    @property
    def given(self) -> bool:
        """Whether the plant was given: nothing was fitted, and its tolerance made the plausible ones."""
        return self.fit.structure == GIVEN


def job_again(earlier: Earlier) -> Again:
    """Put an earlier job together again.

    Raises
    ------
    RequestError
        The sheet is of a structure that can't be fitted to a fresh record, or does not say what was asked.
    """
    sheet = earlier.sheet
    structure = next((each for each in CATALOGUE if each.name == earlier.known.structure), None)
    given = earlier.known.structure == GIVEN
    if (structure is None and not given) or "asked" not in sheet or "noise" not in sheet["plant"]:
        raise RequestError(
            "this sheet can't be rechecked",
            where=str(earlier.file),
            found=f'structure "{earlier.known.structure}"'
            if structure is None and not given
            else "no `asked` or no `plant.noise`",
            expected="a sheet of a fitted or given plant, written by this version",
            advice="process the rig file again and recheck the new sheet",
        )
    requirements, limits, setting = asked_again(sheet["asked"])
    kept = _from_dossier(earlier)
    plausible, draws = kept if kept is not None else _drawn(earlier, structure)
    fit = _fit(earlier, plausible, draws)
    if kept is None:
        fit = with_local_gains(fit, requirements)
    situation = situation_of(
        operating_command=fit.operating_command,
        operating_response=fit.operating_response,
        noise=fit.noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    return Again(fit, _design(earlier, situation), requirements, limits, setting, kept is not None)


def _fit(earlier: Earlier, plausible: Plausible, draws: FloatArray) -> Fit:
    plant = earlier.sheet["plant"]
    known, noise = earlier.known, plant["noise"]
    values = dict(zip(known.names, known.values, strict=True))
    return Fit(
        structure=known.structure,
        plant=known.plant,
        parameters=tuple(_parameter(name, plant["parameters"][name]) for name in known.names),
        covariance=known.covariance,
        operating_command=earlier.operating_command,
        operating_response=earlier.operating_response,
        operating_command_interval=tuple(earlier.sheet["operating_point"]["command"]["interval_95"]),
        noise=Noise(*(float(noise[name]) for name in ("interval", "std", "innovation_std", "rho", "c"))),
        runs=(),
        misfit=float(plant["misfit"]),
        candidates=(),
        ties=tuple(plant["ties"]),
        plausible=plausible,
        explanation=plant["explanation"],
        draws=draws,
        between=plant["between_samples"],
        friction=(float(values.get("friction forward", 0.0)), float(values.get("friction backward", 0.0))),
        bend=_bend(plant.get("curve")),
    )


def _bend(row: dict[str, Any] | None) -> Bend | None:
    if row is None:
        return None
    bend, reach = row["bend"], row["reach"]["value"]
    return Bend(float(row["reference"]["value"]), float(bend["value"]), float(bend["std_error"]), float(reach), 0.0)


def _parameter(name: str, row: dict[str, Any]) -> Parameter:
    low, high = row["interval_95"]
    return Parameter(name, float(row["value"]), row["unit"], float(row["std_error"]), float(low), float(high))


def _design(earlier: Earlier, situation: Situation) -> Design:
    sheet = earlier.sheet
    chosen = sheet["controller"] or sheet["candidate"]["controller"]
    part = sheet["selection"] or sheet["candidate"]["selection"]
    law = law_of_row(chosen["difference_equation"])
    if law is None:
        law = stand_in_law(earlier.gains, situation, earlier.known.plant)
    pole = complex(*part["pole"])
    selection = Selection(
        float(part["loop_gain"]), part["loop_gain_unit"], pole, float(part["angle_residual"]), pole, (), (), ()
    )
    checked = sheet["checked"]
    return Design(
        earlier.gains,
        law,
        selection,
        (),
        (),
        float(checked["share_meeting"]),
        int(checked["plausible_plants"]),
        bool(checked["all_stable"]),
        bool(checked["limits_kept"]),
        float(checked["clamped_share"]),
        float(checked["clamped_duration"]),
        None,
        (),
        (),
        continuous=situation.setting.continuous,
    )


def _from_dossier(earlier: Earlier) -> tuple[Plausible, FloatArray] | None:
    """Plausible plants and draws of the dossier beside the sheet; None where it is absent or of another job."""
    for file in _beside(earlier.file):
        try:
            with h5py.File(file, "r") as dossier:
                if dossier.attrs.get("created") != earlier.sheet["provenance"]["created"]:
                    continue
                # of a given plant nothing was drawn
                given = earlier.known.structure == GIVEN
                draws = np.zeros((0, 0)) if given else dossier["fit/draws"][()]
                return _plausible(dossier["plausible"]), draws
        except (OSError, KeyError):
            continue
    return None


def _beside(sheet: Path) -> list[Path]:
    names = (DOSSIER, "dossier.superseded.h5")
    return [sheet.parent / name for name in names if (sheet.parent / name).is_file()]


def _plausible(group: h5py.Group) -> Plausible:
    tops, bottoms, delays = group["numerator"][()], group["denominator"][()], group["dead_time"][()]
    plants = tuple(
        Plant(_trimmed(top), _trimmed(bottom), float(delay))
        for top, bottom, delay in zip(tops, bottoms, delays, strict=True)
    )
    valves = group["valves"][()] if "valves" in group else None
    curves = group["curves"][()] if "curves" in group else None
    return Plausible(plants, group["operating_command"][()], group["stiction"][()], valves, curves)


def _trimmed(row: FloatArray) -> tuple[float, ...]:
    return tuple(float(c) for c in np.trim_zeros(row, "f"))


def _drawn(earlier: Earlier, structure: Structure | None) -> tuple[Plausible, FloatArray]:
    """From the parameters and their covariance: log shapes, dead time and gain of each drawn plant."""
    order = np.trim_zeros(np.asarray(earlier.known.plant.denominator), "b").size - 1
    if structure is None or len(earlier.known.plant.numerator) > 1 or order > 2:
        raise RequestError(
            "a sheet of this structure can't be rechecked without its dossier",
            where=str(earlier.file),
            found=f'structure "{earlier.known.structure}", and no dossier of that job beside the sheet',
            expected=f"{DOSSIER} of the same job in the same folder",
            advice="put the dossier back, or process the rig file again",
        )
    command = np.array([earlier.operating_command, earlier.operating_command_error])
    plausible = plausible_of(earlier.known, _PLANTS, command)
    names = [named.name for named in structure.named]
    draws = []
    for plant, friction in zip(plausible.plants, plausible.stiction, strict=True):
        shape = _shape(names, plant, float(friction))
        draws.append([*np.log(shape), plant.dead_time, plant.static_gain])
    return plausible, np.array(draws)


def _shape(names: list[str], plant: Plant, friction: float) -> list[float]:
    """Internal parameters of a plant: a second order by frequency and damping ratio, else its times and frictions."""
    bottom = np.trim_zeros(np.asarray(plant.denominator), "b")
    if len(bottom) == 3:
        frequency = float(np.sqrt(bottom[2] / bottom[0]))
        return [frequency, float(0.5 * frequency * bottom[1] / bottom[2])]
    shape = [float(bottom[0] / bottom[1])] if len(bottom) == 2 else []
    return shape + [max(friction, 1e-9)] * sum(name.startswith("friction") for name in names)
