"""Frequency tables for the fuzzer: sound ones in closed form, spoilt as text logs are. Invented throughout."""

import cmath
import math
import random

import text_inputs

READ_AS = """
[rig]
name = "invented"
[operating_point]
command = "0 V"
response = "1 mm"
[signals]
time = {{ source = "t", unit = "s" }}
command = {{ source = "u", unit = "V" }}
response = {{ source = "y", unit = "mm" }}
[[runs]]
file = "table.csv"
use = "fit"
excitation = "frequency-table"
frequency = {{ source = "1", unit = "{frequency}" }}
magnitude = {{ source = "2", unit = "{magnitude}" }}
{more}
[controller]
update_interval = "10 ms"
"""
PHASE = 'phase = { source = "3", unit = "deg" }\n'
ERRORS = 'magnitude_error = { source = "5", unit = "%" }\nphase_error = { source = "6", unit = "deg" }\n'
COHERENCE = 'coherence = { source = "4" }\n'
RIGS = tuple(
    READ_AS.format(frequency=frequency, magnitude=magnitude, more=more)
    for frequency, magnitude, more in (
        ("Hz", "mm/V", PHASE),
        ("rad/s", "dB", PHASE + COHERENCE),
        ("Hz", "dB", PHASE + ERRORS),
        ("rpm", "cm/V", ""),
    )
)
NUMBERS = b"0 -1 1e-300 1e300 -400 4000 180 -180 720 1e9 1.0000001 nan 5 1e-9 0.3 2".split()


def sound(dice: random.Random) -> bytes:
    """A lag of 0.3 s with a dead time of 50 ms and a gain of 10; all six columns."""
    separator = dice.choice((b",", b";", b"\t", b" "))
    rows = [separator.join((b"f", b"gain", b"phase", b"coherence", b"gain_error", b"phase_error"))]
    count = dice.choice((0, 1, 5, 6, 12, 40))
    for point in range(count):
        frequency = 0.05 * 1.3**point
        value = 10.0 * cmath.exp(-0.05j * frequency) / (1.0 + 0.3j * frequency)
        magnitude = abs(value) * math.exp(dice.gauss(0.0, 0.02))
        phase = math.degrees(cmath.phase(value)) + dice.gauss(0.0, 1.0)
        cells = (frequency, magnitude, phase, dice.uniform(0.2, 1.0), 2.0, 1.0)
        rows.append(separator.join(b"%.6g" % cell for cell in cells))
    return b"\n".join(rows) + b"\n"


def spoil(content: bytes, dice: random.Random) -> bytes:
    """A column or a few cells made odd numbers, rows in disorder, or spoilt like any text log."""
    chance = dice.random()
    if chance < 0.4:
        return text_inputs.spoil(content, dice)
    lines = content.split(b"\n")
    if chance < 0.5:
        dice.shuffle(lines)
        return b"\n".join(lines)
    separator = max((b",", b";", b"\t", b" "), key=content.count)
    column, whole = dice.randrange(6), dice.random() < 0.4
    number = dice.choice(NUMBERS)
    for row in range(1, len(lines)):
        cells = lines[row].split(separator)
        if column < len(cells) and (whole or dice.random() < 0.2):
            cells[column] = number if whole else dice.choice(NUMBERS)
            lines[row] = separator.join(cells)
    return b"\n".join(lines)
