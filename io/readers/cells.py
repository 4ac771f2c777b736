"""One cell of a text log: a number, a stamp, a word for "not a number", or other text."""

import re
from collections.abc import Collection

WORDS = frozenset(
    {
        "nan",
        "-nan",
        "+nan",
        "null",
        "none",
        "na",
        "n/a",
        "n.a.",
        "#n/a",
        "-",
        "--",
        "---",
        "ol",
        "+ol",
        "-ol",
        "ovld",
        "ovl",
        "overload",
        "over",
        "under",
        "overflow",
        "underflow",
        "bad",
        "bad input",
        "error",
        "err",
        "fault",
        "invalid",
        "lost",
        "missing",
        "no data",
        "inf",
        "+inf",
        "-inf",
        "infinity",
        "+infinity",
        "-infinity",
        "1.#inf",
        "-1.#inf",
        "1.#qnan",
        "-1.#qnan",
        "1.#ind",
        "-1.#ind",
        "#div/0!",
        "#value!",
        "#num!",
        "#ref!",
        "?",
        "*",
        "***",
    }
)

_POINT = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eEdD][+-]?\d+)?")
_COMMA = re.compile(r"[+-]?(?:\d+(?:,\d+)?|,\d+)(?:[eEdD][+-]?\d+)?")
_THOUSANDS = re.compile(r"[+-]?\d{1,3}(?:[.,' ]\d{3})+(?:[.,]\d+)?")
_STAMP = re.compile(
    r"(?:\d{4}-?\d{2}-?\d{2}[T ]?|\d{1,2}[./]\d{1,2}[./]\d{2,4}[ T]|\d{4}/\d{1,2}/\d{1,2}[ T])?"
    r"\d{1,2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?(?:Z| ?[+-]\d{2}:?\d{2})?(?: ?[AP]M)?"
)


def is_number(text: str, decimal: str) -> bool:
    """Whether a cell is a finite decimal number written with this decimal sign."""
    return (_POINT if decimal == "." else _COMMA).fullmatch(text.strip()) is not None


def is_stamp(text: str) -> bool:
    """Whether a cell is a clock time, with or without a date."""
    return _STAMP.fullmatch(text.strip()) is not None


def is_word(text: str, more: Collection[str] = ()) -> bool:
    """Whether a cell says that there is no number; an empty one does."""
    bare = text.strip()
    return not bare or bare.casefold() in WORDS or bare in more


def has_thousands(text: str) -> bool:
    """Whether a cell looks like a number with separated thousands.

    Examples
    --------
    >>> has_thousands("1.234,5"), has_thousands("1.2345")
    (True, False)
    """
    return _THOUSANDS.fullmatch(text.strip()) is not None
