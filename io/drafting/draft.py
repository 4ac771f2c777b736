"""From an unknown log to the text of a rig file worth editing."""

import contextlib
import os
from pathlib import Path

from ...ident.errors import RequestError
from ..readers.csv import CsvReader
from ..readers.csv_dialect import decode, sniff
from ..readers.csv_rows import SNIFFED_LINES
from ..readers.parts import in_parts
from ..readers.port import Hints, Reader
from ..readers.registry import reader_of
from ..readers.still_there import still_there
from ..rigfile.rig import LogDialect
from .roles import guess_roles
from .seen_channel import SeenChannel, seen_channel
from .tables import guess_table, table_text
from .text import Drafted, draft_text

_DECODED_BYTES = 64 << 20


def draft_rig(run: Path, rig_file: Path) -> str:
    """A rig file for this log, to stand at `rig_file`; nothing is written.

    Parameters
    ----------
    run : Path
        A log that no rig file knows yet.
    rig_file : Path
        Where the rig file will stand: it names the log relative to that.

    Raises
    ------
    RecordError
        When the log can't be read, or holds no two signals.
    """
    with still_there(run):
        return _drafted(run, rig_file)


def _drafted(run: Path, rig_file: Path) -> str:
    reader = reader_of(run)
    channels = read_channels(run, reader)
    shown = os.path.relpath(run.resolve(), rig_file.resolve().parent).replace(os.sep, "/")
    dialect = _dialect(run) if isinstance(reader, CsvReader) else None
    name = run.resolve().stem.replace("_", " ")
    table = guess_table(channels)
    if table is not None:
        return table_text(Drafted(shown, name, reader.name, dialect, None), table)
    return draft_text(Drafted(shown, name, reader.name, dialect, guess_roles(channels, str(run))))


def write_draft(text: str, rig_file: Path) -> None:
    """Write a drafted rig file where nothing stands yet.

    Raises
    ------
    RequestError
        When something stands there, or the folder can't be written to.
    """
    part = rig_file.with_name(f".{rig_file.name}.{os.getpid()}.part")
    try:
        with part.open("w", encoding="utf-8", newline="\n") as stream:
            stream.write(text)
            stream.flush()
            os.fsync(stream.fileno())
        _put_in_place(part, rig_file)
    except FileExistsError as cause:
        raise RequestError(
            "a draft never overwrites",
            where=str(rig_file),
            found="a file of that name",
            expected="a name that is still free",
            advice="name another one with --out",
        ) from cause
    except OSError as cause:
        raise RequestError(
            "the draft can't be written here",
            where=str(rig_file),
            found=cause.strerror or str(cause),
            advice="name another place with --out",
        ) from cause
    finally:
        _remove(part)


def _put_in_place(part: Path, final: Path) -> None:
    """Give a whole file its name, where nothing has that name."""
    try:
        os.link(part, final)
    except FileExistsError:
        raise
    except OSError as problem:  # a share without hard links
        if final.exists():
            raise FileExistsError from problem
        os.replace(part, final)


def _remove(part: Path) -> None:
    with contextlib.suppress(OSError):
        part.unlink(missing_ok=True)


def read_channels(run: Path, reader: Reader) -> list[SeenChannel]:
    """Every channel of a log, of a large one its first part; those of one length are read in one go.

    Raises
    ------
    RecordError
        When the log can't be read.
    """
    hints = Hints()
    infos = reader.channels(run, hints)
    seen: dict[str, SeenChannel] = {}
    for length in dict.fromkeys(info.samples for info in infos):
        names = [info.name for info in infos if info.samples == length]
        log = next(in_parts(reader, run, names, hints))
        for name, channel in log.channels.items():
            seen[name] = seen_channel(channel)
    return [seen[info.name] for info in infos]


def _dialect(run: Path) -> LogDialect:
    with run.open("rb") as log:
        text, encoding = decode(log.read(_DECODED_BYTES))
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")[:SNIFFED_LINES]
    found = sniff(lines, LogDialect(), str(run))
    return LogDialect(found.separator, found.decimal, encoding)
