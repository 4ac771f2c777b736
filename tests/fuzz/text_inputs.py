"""Text logs for the fuzzer: sound ones in many dialects, and the ways to spoil their bytes. Invented throughout."""

import random

NUMBERS = [
    *b"0 -0 1e308 -1e308 1e999 1e-320 .5 5. +.5 1,5 1.5 1.234,5 1,234.5 1D3 1d-3 0x1F 1_000 --1 1e 1e+".split(),
    *b"9007199254740993 1700000000000000000 -9223372036854775808 999999999999999999999999 9.91e37".split(),
    *b"nan NaN -inf inf 1.#INF OL ? \xd9\xa1\xd9\xa2 \xe2\x88\x921".split(),
    b"",
    b" ",
]
STAMPS = (
    b"00:00 00:00:00 23:59:59.999 24:00:00 99:99 12:34:56,789 12:34:56 PM|2026-11-03T12:34:56Z|2026-11-03 00:00:00.5|"
    b"20261103T123456|0000-00-00T00:00:00|9999-12-31T23:59:59.999999999|2026-02-30T00:00:00|1677-09-21T00:00:00|"
    b"2026-11-03T12:34:56+99:99|03.11.2026 12:00:00|3/11/26 12:00 AM|2026/11/03 12:00:00|NaT|2026-11-03T12:34:56"
).split(b"|")
TEXTS = [
    b"t [s]",
    b"u (V)",
    b"y / mm",
    b"[",
    b"]",
    b"[[s]]",
    b"()",
    b"degC",
    b"#",
    b"%",
    b"//",
    b'"',
    b'""',
    b"'",
    b"\\",
]
TEXTS += [
    b"\x00",
    b"\x1a",
    b"\x0c",
    b"\xff",
    b"\xfe\xff",
    b"\xff\xfe",
    b"\xef\xbb\xbf",
    b"\x85",
    b"\xe2\x80\xa8",
    b"\xc2\xb0C",
]
SEPARATORS = [b",", b";", b"\t", b"|", b" ", b"  ", b", ", b":", b"/"]
ENDS = [b"\n", b"\r\n", b"\r", b"\n\n", b"\n\r", b""]
ENCODINGS = ("utf-16", "utf-16-le", "utf-16-be", "utf-32", "cp1252", "utf-8-sig")


def sound(dice: random.Random) -> bytes:
    """A log as some logger writes it."""
    separator, end = dice.choice(SEPARATORS[:7]), dice.choice(ENDS[:3])
    decimal = b"," if separator.strip() not in (b",",) and dice.random() < 0.3 else b"."
    width = dice.choice((1, 2, 3, 3, 3, 4, 8))
    lines = [
        dice.choice((b"# made by hand", b"Test 3; door shut", b"", b"a,b")) for _ in range(dice.choice((0, 0, 1, 4)))
    ]
    if dice.random() < 0.8:
        names = [
            dice.choice((b"t", b"u", b"y", b"pos [mm]", b"drive (V)", b"temp / degC", b"", b"1")) for _ in range(width)
        ]
        lines.append(separator.join(names))
        if dice.random() < 0.3:
            lines.append(separator.join(dice.choice((b"s", b"V", b"mm", b"[mm]", b"", b"C")) for _ in range(width)))
    stamped = dice.random() < 0.2
    kind = dice.choice((b"2026-11-03T12:%02d:%02d", b"12:%02d:%02d", b"03.11.2026 12:%02d:%02d"))
    for row in range(dice.choice((0, 1, 2, 3, 6, 12, 60))):
        cells = [b"%.3f" % (row * 0.01 if not column else dice.gauss(0.0, 1.0)) for column in range(width)]
        cells = [cell.replace(b".", decimal) for cell in cells]
        if stamped:
            cells[0] = kind % (row // 60, row % 60)
        lines.append(separator.join(cells) + (separator if dice.random() < 0.01 else b""))
    content = end.join(lines) + (end if dice.random() < 0.9 else b"")
    if dice.random() < 0.1:
        content = content.decode().encode(dice.choice(ENCODINGS))
    return content


def spoil(content: bytes, dice: random.Random, most: int = 4096) -> bytes:
    """One to a few changes of bytes, cells, lines or the whole."""
    for _ in range(dice.choice((1, 1, 2, 3, 6))):
        content = dice.choice(_WAYS)(content, dice)[:most]
    return content


def wide_or_long(dice: random.Random) -> bytes:
    """Cheap to write and perhaps dear to read: very many columns, one endless cell, runs of one sign."""
    many = dice.choice((100, 1000, 4000))
    filler = dice.choice(
        (b" ", b"\t", b"[", b"(", b'"', b"1", b"1,", b",", b"1:", b"1.", b"#", b"\n", b"\x00", b"()", b"a/ ")
    )
    run = filler * many
    return dice.choice(
        (
            b",".join([b"1"] * many) + b"\n" + b",".join([b"2"] * many) + b"\n",
            b"t,u" + run + b"x,y\n1,2,3\n2,3,4\n",
            b"t,u,y\n1,2,3\n2," + run + b",4\n3,4,5\n",
            b"t,u,y\n" + run + b"\n1,2,3\n2,3,4\n",
            run,
            b"t,u,y\n1,2,3\n2,3,4\n" + run,
        )
    )


def _bytes_changed(content: bytes, dice: random.Random) -> bytes:
    if not content:
        return bytes([dice.randrange(256)])
    place = dice.randrange(len(content))
    new = dice.choice((bytes([dice.randrange(256)]), b"", dice.randbytes(4), content[place : place + 1] * 2))
    return content[:place] + new + content[place + 1 :]


def _cut_or_doubled(content: bytes, dice: random.Random) -> bytes:
    start, end = sorted(dice.randrange(len(content) + 1) for _ in range(2))
    return dice.choice(
        (content[:start], content[start:], content[:start] + content[end:], content[:end] + content[start:])
    )


def _cell_replaced(content: bytes, dice: random.Random) -> bytes:
    separator = max(SEPARATORS[:5], key=content.count)
    lines = content.split(b"\n")
    row = dice.randrange(len(lines))
    cells = lines[row].split(separator)
    cells[dice.randrange(len(cells))] = dice.choice(dice.choice((NUMBERS, STAMPS, TEXTS)))
    lines[row] = separator.join(cells)
    return b"\n".join(lines)


def _column_replaced(content: bytes, dice: random.Random) -> bytes:
    separator = max(SEPARATORS[:5], key=content.count)
    kind, column = dice.choice((NUMBERS, STAMPS, TEXTS)), dice.randrange(4)
    lines = []
    for line in content.split(b"\n"):
        cells = line.split(separator)
        if column < len(cells):
            cells[column] = dice.choice(kind)
        lines.append(separator.join(cells))
    return b"\n".join(lines)


def _line_moved(content: bytes, dice: random.Random) -> bytes:
    lines = content.split(b"\n")
    line = lines.pop(dice.randrange(len(lines)))
    for _ in range(dice.choice((0, 1, 1, 2, 30))):
        lines.insert(dice.randrange(len(lines) + 1), line)
    return b"\n".join(lines)


def _signs_swapped(content: bytes, dice: random.Random) -> bytes:
    old, new = dice.choice((SEPARATORS, ENDS[:3])), dice.choice((SEPARATORS, ENDS, TEXTS))
    return content.replace(dice.choice(old), dice.choice(new), dice.choice((-1, 1, 5)))


def _text_put_in(content: bytes, dice: random.Random) -> bytes:
    place = dice.choice((0, len(content), dice.randrange(len(content) + 1)))
    return content[:place] + dice.choice(TEXTS + NUMBERS + STAMPS) * dice.choice((1, 1, 2, 50)) + content[place:]


def _encoded_anew(content: bytes, dice: random.Random) -> bytes:
    return content.decode("latin-1").encode(dice.choice(ENCODINGS), "replace")


_WAYS = (
    _bytes_changed,
    _bytes_changed,
    _cut_or_doubled,
    _cell_replaced,
    _cell_replaced,
    _column_replaced,
    _line_moved,
    _signs_swapped,
    _text_put_in,
    _encoded_anew,
)
