"""What is wrong with a rig file, in words: file, key, found, expected, the nearest right word."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any, TypeVar

from ...ident.errors import RequestError

if TYPE_CHECKING:
    from pydantic import BaseModel
    from pydantic_core import ErrorDetails

Value = TypeVar("Value")


@dataclass(frozen=True)
class Problem:
    """One thing that is wrong.

    Attributes
    ----------
    key : str
        As people write it: "runs[2].signals.command.unit", runs counted from 1.
    what, found, expected, advice : str
    """

    key: str
    what: str
    found: str = ""
    expected: str = ""
    advice: str = ""


class Problems:
    """Collects what is wrong, so that one call says all of it.

    Parameters
    ----------
    file : str
        Name of the rig file, for the messages.
    """

    def __init__(self, file: str) -> None:
        self.file = file
        self._found: list[Problem] = []

    def add(self, key: str, what: str, found: str = "", expected: str = "", advice: str = "") -> None:
        """Note one problem."""
        self._found.append(Problem(key, what, found, expected, advice))

    def extend(self, more: Iterable[Problem]) -> None:
        """Note several."""
        self._found.extend(more)

    def attempt(self, key: str, compute: Callable[[], Value], fallback: Value) -> Value:
        """The computed value; when it is refused, the reason is noted under `key` and the fallback stands in."""
        try:
            return compute()
        except RequestError as problem:
            self.add(key, problem.what, problem.found, problem.expected, problem.advice)
            return fallback

    def raise_any(self) -> None:
        """Raise when anything was noted.

        Raises
        ------
        RequestError
            One error for all problems; with a single one its parts are the error's parts.
        """
        if len(self._found) == 1:
            only = self._found[0]
            where = f"{self.file}: {only.key}" if only.key else self.file
            raise RequestError(only.what, where=where, found=only.found, expected=only.expected, advice=only.advice)
        if self._found:
            each = [
                RequestError(p.what, where=p.key, found=p.found, expected=p.expected, advice=p.advice).text
                for p in self._found
            ]
            listed = "\n".join("  " + text.replace("\n", "\n  ") for text in each)
            raise RequestError(f"{len(each)} things are wrong\n{listed}", where=self.file)


def nearest(word: str, words: Sequence[str]) -> str:
    """The right word that looks most like this one, as advice; empty when none does.

    Examples
    --------
    >>> nearest("settling_tme", ["settling_time", "rise_time"])
    'did you mean "settling_time"?'
    """
    folded = {candidate.casefold(): candidate for candidate in words}
    close = get_close_matches(word.casefold(), folded, n=1, cutoff=0.55)
    return f'did you mean "{folded[close[0]]}"?' if close else ""


def listed(words: Sequence[str], most: int = 24) -> str:
    """Words in quotes, the first `most` of them."""
    shown = ", ".join(f'"{word}"' for word in words[:most])
    return shown + (f" and {len(words) - most} more" if len(words) > most else "")


def key_of(location: Sequence[str | int]) -> str:
    """A place in the file as people write it; runs are counted from 1."""
    key = ""
    for part in location:
        key += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if key else part
    return key


def shape_problems(errors: Iterable["ErrorDetails"], model: type["BaseModel"]) -> list[Problem]:
    """What pydantic found, in our words.

    Parameters
    ----------
    errors : iterable of ErrorDetails
    model : class
        The model of the whole file, to know the words that would have been right.
    """
    return [_shape_problem(error, model) for error in errors]


def _shape_problem(error: "ErrorDetails", model: type["BaseModel"]) -> Problem:
    location = [part for part in error["loc"] if not (isinstance(part, str) and part.startswith("="))]
    key, value, kind = key_of(location), error["input"], error["type"]
    field = _field(model, location)
    if kind == "extra_forbidden":
        words = _words(_inside(model, location[:-1]))
        return Problem(key, "unknown key", str(location[-1]), listed(words), nearest(str(location[-1]), words))
    if kind == "missing":
        return Problem(key, "this key is missing", expected=_expected(field))
    if kind == "literal_error":
        words = [word.strip("'") for word in str(error["ctx"]["expected"]).replace(" or ", ", ").split(", ")]
        return Problem(key, "not a known word", _shown(value), listed(words), nearest(str(value), words))
    if kind in {"value_error", "assertion_error"}:
        return Problem(key, str(error["ctx"]["error"]), _shown(value), _expected(field))
    return Problem(key, "wrong kind of value", _shown(value), _expected(field) or _plain(kind))


def _plain(kind: str) -> str:
    names = {
        "string": "a text in quotes",
        "float": "a bare number",
        "int": "a whole number",
        "bool": "true or false",
        "list": "a list in brackets",
        "tuple": "a list in brackets",
        "model": "a table",
        "dict": "a table",
    }
    return names.get(kind.split("_")[0], kind.replace("_", " "))


def _shown(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{value}"'
    return "a table" if isinstance(value, dict) else str(value)


def _expected(field: Any) -> str:
    examples = getattr(field, "examples", None)
    return "such as " + " or ".join(_shown(example) for example in examples) if examples else ""


def _words(model: Any) -> list[str]:
    if model is None:
        return []
    words = [field.alias or name for name, field in model.model_fields.items()]
    return sorted(words, key=lambda word: word == "guessed")


def _field(model: type["BaseModel"], location: Sequence[str | int]) -> Any:
    outer = _inside(model, location[:-1])
    if outer is None or not location:
        return None
    return next((f for name, f in outer.model_fields.items() if location[-1] in {name, f.alias}), None)


def _inside(model: Any, location: Sequence[str | int]) -> Any:
    """The model that stands at a place of the file, None where there is none."""
    for part in location:
        if isinstance(part, int) or model is None:
            continue
        field = next((f for name, f in model.model_fields.items() if part in {name, f.alias}), None)
        model = _model_of(field.annotation) if field is not None else None
    return model


def _model_of(annotation: Any) -> Any:
    if hasattr(annotation, "model_fields"):
        return annotation
    inner = (_model_of(argument) for argument in getattr(annotation, "__args__", ()))
    return next((model for model in inner if model is not None), None)
