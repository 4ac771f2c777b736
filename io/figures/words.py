"""Texts that stand in pictures: names from logs are data, numbers are short."""

import math


def one_line(text: str) -> str:
    r"""A name without the signs that break a line, a file or a terminal.

    Examples
    --------
    >>> one_line("a\nb\x1b[31m")
    'a b[31m'
    """
    spaced = "".join(" " if sign in "\t\r\n\u2028\u2029" else sign for sign in text)
    return "".join(sign for sign in spaced if _shown(sign))


def plain(text: str) -> str:
    r"""A name as it may stand in a picture: on one line, and its dollar signs are letters.

    Examples
    --------
    >>> plain("$x_1$")
    '\\$x_1\\$'
    """
    return one_line(text).replace("$", r"\$")


def _shown(sign: str) -> bool:
    code = ord(sign)
    control = code < 0x20 or 0x7F <= code < 0xA0
    turned = 0x202A <= code <= 0x202E or 0x2066 <= code <= 0x2069
    return not (control or turned or 0xD800 <= code <= 0xDFFF or code in (0xFFFE, 0xFFFF))


def number(value: float | None, digits: int = 4) -> str:
    """A number of so many significant digits, without an exponent where it reads well without.

    Examples
    --------
    >>> number(0.123456), number(1234567.0), number(-0.00001234), number(None), number(40.0)
    ('0.1235', '1.235e6', '-1.234e-5', 'never', '40')
    """
    if value is None or math.isnan(value):
        return "never"
    if math.isinf(value):
        return "-∞" if value < 0 else "∞"
    text = f"{value:.{digits}g}"
    if "e" in text:
        mantissa, exponent = text.split("e")
        power = int(exponent)
        whole = 0 <= power < digits + 3 and abs(value) < 10 ** (digits + 1)
        text = f"{value:.0f}" if whole else f"{mantissa}e{power}"
    return text if float(text) != 0.0 else "0"


def with_unit(value: float | None, unit: str, digits: int = 4) -> str:
    """A number with its unit, none for a pure number.

    Examples
    --------
    >>> with_unit(12.5, "mm"), with_unit(0.7, "1"), with_unit(10.0, "%")
    ('12.5 mm', '0.7', '10 %')
    """
    shown = number(value, digits)
    return shown if unit in ("", "1") or shown == "never" else f"{shown} {unit}"
