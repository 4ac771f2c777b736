"""The unit of a fitted parameter on this rig; identification itself knows no units of command and response."""

from ..design.compensator import over_second, per_response
from ..ident.fitted import Parameter


def _over_second_twice(top: str, below: str) -> str:
    once = over_second(top, below)
    return once[:-1] + "^2)" if once.endswith(")") else once + "^2"


_OVER = {0: per_response, 1: over_second, 2: _over_second_twice}


def unit_of(parameter: Parameter, integrators: int, command_unit: str, response_unit: str) -> str:
    """Unit as sheet, dossier and report print it.

    Parameters
    ----------
    parameter : Parameter
        Its unit is "s", "rad/s", "1", or the word "command" or "response" for a quantity of that signal.
    integrators : int
        Of the plant: an integrating plant's gain is per second, too, that of one with two per second squared.
    command_unit, response_unit : str

    Examples
    --------
    >>> unit_of(Parameter("gain", 2.0, "gain/s", 0.1, 1.8, 2.2), 1, "V", "mm")
    'mm/(V s)'
    >>> unit_of(Parameter("gain", 2.0, "gain/s^2", 0.1, 1.8, 2.2), 2, "V", "mm")
    'mm/(V s^2)'
    >>> unit_of(Parameter("friction forward", 0.2, "command", 0.1, 0.1, 0.3), 1, "V", "mm")
    'V'
    """
    if parameter.name == "gain":
        if integrators > 1:
            below = f"{command_unit} s^{integrators}" if command_unit != "1" else f"s^{integrators}"
            return f"{response_unit}/({below})"
        return _OVER[integrators](response_unit, command_unit)
    return {"command": command_unit, "response": response_unit}.get(parameter.unit, parameter.unit)
