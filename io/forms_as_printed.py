"""The forms of the gains as sheet and report show them: every promised key, null where a part does not exist."""

from typing import Any

from ..design.forms import Form, forms_of
from ..design.gains import Gains

_TIMES = ("gain", "integral_time", "derivative_time", "derivative_filter_time")
_KEYS = {
    "parallel": ("proportional", "integral", "derivative", "derivative_filter_time"),
    "standard": _TIMES,
    "series": _TIMES,
    "zero-pole": ("gain", "zero", "pole"),
}


def forms_as_printed(gains: Gains, command_unit: str, response_unit: str) -> dict[str, Any]:
    """All four forms with full keys; a form that does not exist is None.

    Parameters
    ----------
    gains : Gains
    command_unit, response_unit : str

    Examples
    --------
    >>> forms_as_printed(Gains("P", 0.5), "V", "mm")["standard"]["gain"]
    {'value': 0.5, 'unit': 'V/mm'}
    >>> forms_as_printed(Gains("P", 0.5), "V", "mm")["zero-pole"] is None
    True
    """
    forms = forms_of(gains, command_unit, response_unit)
    return {name: _full(forms[name], keys) for name, keys in _KEYS.items()}


def _full(form: Form | None, keys: tuple[str, ...]) -> dict[str, Any] | None:
    if form is None:
        return None
    more = [key for key in form if key not in keys]
    every = (*keys, *more)
    return {key: {"value": float(form[key].value), "unit": form[key].unit} if key in form else None for key in every}
