"""Whether a record is enough to tune from, while it still grows."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from ...ident.errors import RecordError

if TYPE_CHECKING:
    from ...ident.fitted import Fit, Parameter

TOLERANCE = 0.1  # half of a 95 % interval over the value; times are held against all times together


@dataclass(frozen=True)
class Enough:
    """An answer.

    Attributes
    ----------
    enough : bool
    said : str
        What is known so far, or what is missing.
    """

    enough: bool
    said: str


def enough(rig_file: Path, run: Path) -> Enough:
    """Fit a record by itself and look at its intervals.

    Parameters
    ----------
    rig_file : Path
    run : Path
        In plain columns: time in s, command, response.

    Raises
    ------
    RequestError
        When the rig file is wrong.
    """
    from ...ident.identify import identify
    from ..read_record import read_record
    from ..rigfile.load import load_rig
    from ..rigfile.rig import RunSpec
    from .jobs import plain_signals

    rig = load_rig(rig_file)
    spec = RunSpec(run.resolve(), run.name, "fit", "open", "auto", "auto", plain_signals(rig))
    try:
        record = read_record(spec, rig)
        bad = [each for each in record.findings if each.refuses == "holds"]
        if bad:
            return Enough(False, bad[0].text)
        fit = identify([record.run], operating_command=rig.operating_command)
        return judge(fit, rig.command_unit, rig.response_unit)
    except RecordError as error:
        return Enough(False, error.what)


def judge(fit: "Fit", command_unit: str, response_unit: str) -> Enough:
    """Enough when gain and frequencies are known to 10 %, and each time to 10 % of all times together.

    Parameters
    ----------
    fit : Fit
    command_unit, response_unit : str
    """
    from ..parameter_unit import unit_of

    def said(parameter: "Parameter") -> str:
        unit = unit_of(parameter, fit.plant.integrators, command_unit, response_unit)
        return f"{parameter.name} {parameter.value:.3g} {unit}"

    times = sum(abs(each.value) for each in fit.parameters if each.unit == "s")
    loose = [
        f"{said(each)} within {each.low:.3g} to {each.high:.3g}"
        for each in fit.parameters
        if _judged(each) and 0.5 * (each.high - each.low) > TOLERANCE * (times if each.unit == "s" else abs(each.value))
    ]
    if fit.ties:
        loose.append(f"{fit.structure} can't be told from {', '.join(fit.ties)}")
    if loose:
        return Enough(False, "not yet: " + "; ".join(loose))
    return Enough(True, f"{fit.structure}: {', '.join(map(said, fit.parameters))}")


def _judged(parameter: "Parameter") -> bool:
    return parameter.name.startswith(("gain", "time constant", "dead time", "natural frequency"))
