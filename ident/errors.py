"""The one base error: what went wrong, where, what was found, what was expected, and what to do next."""


class GainwrightError(Exception):
    """Base of every deliberate error.

    Parameters
    ----------
    what : str
        What went wrong, as a sentence without a full stop.
    where : str
        File, line, key or channel.
    found, expected : str
        The value met and the value that would have been right; empty where there is none.
    advice : str
        The next step for the person who reads it.
    """

    def __init__(self, what: str, *, where: str = "", found: str = "", expected: str = "", advice: str = "") -> None:
        self.what = what
        self.where = where
        self.found = found
        self.expected = expected
        self.advice = advice
        super().__init__(self.text)

    @property
    def text(self) -> str:
        """The whole message on one or more lines, the parts that exist only."""
        head = f"{self.where}: {self.what}" if self.where else self.what
        parts = [head]
        parts += [f"  found:    {self.found}"] if self.found else []
        parts += [f"  expected: {self.expected}"] if self.expected else []
        parts += [f"  next:     {self.advice}"] if self.advice else []
        return "\n".join(parts)

    def __reduce__(self) -> tuple[object, ...]:
        """Keep the parts when the error crosses a process."""
        return (_rebuild, (type(self), self.what, self.where, self.found, self.expected, self.advice))


def _rebuild(
    kind: type[GainwrightError], what: str, where: str, found: str, expected: str, advice: str
) -> GainwrightError:
    return kind(what, where=where, found=found, expected=expected, advice=advice)


class RequestError(GainwrightError):
    """The call or the rig file is wrong (exit code 2)."""


class RecordError(GainwrightError):
    """A record can't be used (exit code 4)."""
