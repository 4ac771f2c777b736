"""Rig files for the fuzzer: a whole one, and the ways to spoil its keys, values and bytes. Invented throughout."""

import random

SOUND = """
[rig]
name = "invented"
[operating_point]
command = "0 V"
response = "1 mm"
[log]
separator = ","
decimal = "."
encoding = "utf-8"
header_row = 1
first_row = 2
not_a_number = ["OL"]
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V", scale = 1.0, offset = 0.0, lost_as = [-999.0] }
response = { source = "y", unit = "mm", range = { lowest = "-50 mm", highest = "50 mm" } }
setpoint = { source = "y", unit = "mm" }
[[runs]]
file = "log.csv"
use = "fit"
loop = "open"
excitation = "step"
from = "0 s"
to = "1 s"
between_samples = "held"
before = { command = "0 V" }
taken = "2026-11-03"
[[runs]]
file = "log*.csv"
use = "held-out"
from = "1 s"
to = "2 s"
[runs.signals]
setpoint = false
[controller]
update_interval = "10 ms"
computation_delay = "1 ms"
structures = ["PI", "PID"]
[requirements]
test_step = "2 mm"
both_directions = false
overshoot = { at_most = "10 %" }
settling_time = { at_most = "0.8 s", band = "2 %" }
steady_state_error = { at_most = "0.1 mm" }
ramp_error = { at_most = "0.5 mm", ramp = "10 mm/s" }
disturbance_peak = { at_most = "0.5 mm", command_step = "1 V" }
gain_margin = { at_least = "6 dB" }
phase_margin = { at_least = "45 deg" }
confidence = "95 %"
[limits]
command = { lowest = "-10 V", highest = "10 V" }
command_rate = "not limited"
response = { lowest = "-300 mm", highest = "300 mm" }
response_rate = { highest = "600 mm/s" }
"""
GIVEN = """
[rig]
name = "known"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[plant]
numerator = [10.0]
denominator = [1.0, 3.0, 2.0, 0.0]
dead_time = "0.1 s"
tolerance = { gain = "20 %", dead_time = "20 %", poles = "20 %" }
[[runs]]
file = "log.csv"
use = "held-out"
[requirements]
test_step = "2 mm"
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = "not limited"
"""
VALUES = [
    "true", "false", "0", "-1", "1", "0.0", "-0.0", "1e308", "1e999", "inf", "-inf", "nan", "9223372036854775808",
    "0x7f", "[]", "{}", "[[]]", "[1]", '[""]', '""', '" "', '"s"', '"0 s"', '"-1 s"', '"1e999 s"', '"1e308 mm"',
    '"1e-320 s"', '"1 m^2"', '"1 mm/s/s/s"', '"5 %"', '"150 %"', '"1 degC"', '"-300 degC"', '"1 degF"', '"6 dB"',
    '"1,5 V"', '"0.1 s s s s"', '"1 /"', '"1 (mm"', '"1 mm**9"', '"not limited"', '"auto"', '"fit"', '"held-out"',
    '"closed"', '"frequency-table"', '"log.csv"', '"*"', '"**"', '"**.csv"', '"[!]"', '"[a"', '"?"', '"/"', '"."',
    '".."', '"../*"', '"log.csv/x"', r'"\u0000"', r'"a\u0000b*"', '"~"', '"\U0001f600"', '"1"', '"t"', '"nowhere"',
    '"\\t"', '"\\""', '"\\n"', '";"', '"hex"', '"idna"', '"undefined"', '"punycode"', '"utf-16"', '"utf-7"',
    '"unicode_escape"', '"raw_unicode_escape"', "2026-11-03", "12:34:56", "2026-11-03T12:34:56Z", "{ lowest = 1 }",
    '{ at_most = "1 %" }', '{ source = "t" }', "{ guessed = true }", "[1.0, 0.0]", "[0.0]", "[1e300, 1e-300]",
    '"lead"', '"PID"', '"I"', '"one lag"', "'''\n'''",
]  # fmt: skip
LINES = [
    "guessed = true", "[runs]", "[[runs]]", "[runs.current]", "[controller.current]", 'proportional = "0.4 V/mm"',
    'integral = "2 V/(mm s)"', 'loop = "closed"', "[plant]", "numerator = [1.0]", "denominator = [1.0, 0.0]",
    'dead_time = "0 s"', 'sheet = "log.csv"', 'sheet = "nowhere.json"', "[signals.command]", 'source = "u"',
    "[runs.signals]", "command = false", 'sample_rate = "1 kHz"', "[a.b.c.d]", "a.b.c = 1", "= 1", "x",
    "# only said", "group = \"/\"", 'frequency = { source = "t", unit = "Hz" }',
    'magnitude = { source = "u", unit = "dB" }', 'phase = { source = "y", unit = "deg" }', "[[limits]]", "[[rig]]",
]  # fmt: skip


def sound(dice: random.Random) -> bytes:
    """A rig file with some of its lines left out."""
    lines = dice.choice((SOUND, SOUND, SOUND, GIVEN)).splitlines()
    drop = dice.choice((0.0, 0.0, 0.05, 0.2))
    return "\n".join(line for line in lines if dice.random() >= drop).encode()


def spoil(content: bytes, dice: random.Random, most: int = 8192) -> bytes:
    """One to a few changes."""
    for _ in range(dice.choice((1, 1, 1, 2, 3))):
        content = dice.choice(_WAYS)(content, dice)[:most]
    return content


def deep_or_long(dice: random.Random) -> bytes:
    """Cheap to write and perhaps dear to read: deep nesting, endless numbers, names and texts."""
    many = dice.choice((50, 500, 5000))
    value = dice.choice(
        (
            "[" * many + "]" * many,
            "{a=" * many + "1" + "}" * many,
            "1" * many,
            '"1' + " " * many + 'x"',
            '"' + "1" * many + ' s"',
            '"1 ' + "m*" * many + 'm"',
            '"1 ' + "(" * many + 'm"',
            '"' + "*/" * min(many, 40) + '*"',
            '"' + "x" * many + '"',
            '"' + "?" * many + '"',
            "[" + "1.0," * many + "]",
        )
    )
    return _value_replaced(sound(dice), dice, value)


def _value_replaced(content: bytes, dice: random.Random, value: str | None = None) -> bytes:
    lines = content.decode("utf-8", "replace").split("\n")
    places = [(row, place) for row, line in enumerate(lines) for place, sign in enumerate(line) if sign == "="]
    if places:
        row, place = dice.choice(places)
        head, tail = lines[row][: place + 1], lines[row][place + 1 :]
        ends = [end for end in (tail.find(","), tail.find("}")) if end >= 0]
        tail = tail[min(ends) :] if ends and head.count("{") else ""
        lines[row] = f"{head} {dice.choice(VALUES) if value is None else value}{tail}"
    return "\n".join(lines).encode()


def _line_changed(content: bytes, dice: random.Random) -> bytes:
    lines = content.split(b"\n")
    line = lines.pop(dice.randrange(len(lines)))
    for _ in range(dice.choice((0, 1, 2))):
        lines.insert(dice.randrange(len(lines) + 1), line)
    return b"\n".join(lines)


def _line_put_in(content: bytes, dice: random.Random) -> bytes:
    lines = content.split(b"\n")
    lines.insert(dice.randrange(len(lines) + 1), dice.choice(LINES).encode())
    return b"\n".join(lines)


def _word_changed(content: bytes, dice: random.Random) -> bytes:
    words = content.split(b" ")
    place = dice.randrange(len(words))
    words[place] = dice.choice(
        (words[place].upper(), words[place][:-1], dice.choice(words), words[place] + words[place])
    )
    return b" ".join(words)


def _byte_changed(content: bytes, dice: random.Random) -> bytes:
    place = dice.randrange(len(content) + 1)
    new = dice.choice((bytes([dice.randrange(256)]), b"", b"\r", b'"', b"[", b"\\u0000", b"\xef\xbb\xbf", b"'"))
    return content[:place] + new + content[place + dice.randrange(2) :]


def _cut(content: bytes, dice: random.Random) -> bytes:
    start, end = sorted(dice.randrange(len(content) + 1) for _ in range(2))
    return dice.choice((content[:start], content[:start] + content[end:], content[:end] + content[start:]))


_WAYS = (
    _value_replaced,
    _value_replaced,
    _value_replaced,
    _line_changed,
    _line_put_in,
    _word_changed,
    _byte_changed,
    _cut,
)
