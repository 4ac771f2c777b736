"""Labels of composed units, written as people write them in the trade: "mm/V", "mm/(V s)"."""


def gain_unit(response_unit: str, command_unit: str, *, per_second: int = 0) -> str:
    """Unit of a plant's gain; `per_second` is the number of integrators.

    Examples
    --------
    >>> gain_unit("mm", "V")
    'mm/V'
    >>> gain_unit("mm", "V", per_second=1)
    'mm/(V s)'
    >>> gain_unit("degC", "%", per_second=2)
    'degC/(% s^2)'
    >>> gain_unit("m/s", "1")
    'm/s'
    >>> gain_unit("1", "rev/min", per_second=1)
    '1/((rev/min) s)'
    """
    below = [part for part in (_grouped(command_unit), _seconds(per_second)) if part]
    if not below:
        return response_unit
    above = _grouped(response_unit) or "1"
    return f"{above}/{below[0]}" if len(below) == 1 else f"{above}/({' '.join(below)})"


def _grouped(unit: str) -> str:
    if unit in ("", "1"):
        return ""
    return f"({unit})" if any(sign in unit for sign in "/ *") else unit


def _seconds(power: int) -> str:
    return "" if power == 0 else "s" if power == 1 else f"s^{power}"
