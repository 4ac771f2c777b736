"""What the names of channels say."""

import re

_WORDS = re.compile(r"[A-Z]?[a-z]+|[A-Z]+(?![a-z])|\d+|[^\W\d_]+")
_LAST = re.compile(r"[^\s_./-]+$")
# units that a name may end in; single letters that also number channels are left out
_SUFFIX_UNITS = re.compile(
    r"(?:s|ms|us|ns|min|h|V|mV|kV|A|mA|mm|cm|um|m|degC|degF|K|rpm|bar|mbar|kPa|Pa|N|kN|Nm|deg|rad|mrad|Hz|W|kW|pct|g0)"
)


def words_of(name: str) -> tuple[str, ...]:
    """The words of a name, split at signs, digits and capitals.

    Examples
    --------
    >>> words_of("/rig/driveVolts_2")
    ('rig', 'drive', 'volts', '2')
    """
    return tuple(word.lower() for word in _WORDS.findall(name))


def unit_in_name(name: str) -> str | None:
    """A unit at the end of a name, after a sign that parts it from the rest.

    Examples
    --------
    >>> unit_in_name("drive_V"), unit_in_name("pos"), unit_in_name("t_ms")
    ('V', None, 'ms')
    """
    last = _LAST.search(name)
    if last is None or last.start() == 0 or not _SUFFIX_UNITS.fullmatch(last.group()):
        return None
    return "%" if last.group() == "pct" else last.group()
