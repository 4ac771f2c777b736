"""A log larger than memory as a record: read part by part, looked at sample by sample, kept as means over blocks.

Blocks are never longer than half the controller's interval: what is faster, no controller of that interval can act on.
Where that leaves more blocks than a fit can use, the part of the record is taken in which the command moves most.
"""

import math
from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..ident.blocks import BlockMeans, Means, as_drawn, held
from ..ident.errors import RecordError, RequestError
from ..ident.health.fingerprint import Marks, fingerprint
from ..ident.health.in_parts import SEEN_IN_PARTS, PartsLook
from ..ident.run import Between, FloatArray
from .in_order import finding_of, in_order
from .look_at_record import reading_range
from .readers.parts import PART
from .readers.port import ChunkedReader, Hints, Log, Reader
from .record import Finding
from .rigfile.rig import Rig, RunSpec
from .samples import Begun, Samples, begin, samples_of

MOST_BLOCKS = 1_000_000
SLACK = 1.05  # how many samples a text log has is an estimate
AT_EDGES = 0.9  # of the command's movement
BLOCKS_AN_UPDATE = 2  # at least, in one interval of the controller


@dataclass(frozen=True, eq=False)
class Taken:
    """What was taken of a log.

    Attributes
    ----------
    samples : Samples
        Of the window; block means where the log is large.
    before : float or None, command unit
        Steady command before them.
    findings : tuple of Finding
    late : float, s
        After its sample, the command moves.
    between : {"interpolated", ...} or None
        What the command does between the samples, where the blocks decide it.
    marks : (m,) array or None
        Fingerprint of all samples of a large log.
    seen_already : set of str
        Kinds of findings that were looked for in all samples.
    """

    samples: Samples
    before: float | None
    findings: tuple[Finding, ...]
    late: float = 0.0
    between: Between | None = None
    marks: Marks | None = None
    seen_already: frozenset[str] = frozenset()


def thinned(spec: RunSpec, rig: Rig, reader: Reader, sources: Sequence[str], hints: Hints, asked: int) -> Taken:
    """Read a large log in bounded memory.

    Parameters
    ----------
    spec : RunSpec
    rig : Rig
        Its controller's interval bounds the blocks.
    reader : ChunkedReader
    sources : sequence of str
    hints : Hints
    asked : int
        About how many samples it has.

    Raises
    ------
    RecordError, RequestError
        As when it is read whole; also where its command would have to be worked out.
    """
    assert isinstance(reader, ChunkedReader)
    if "command" not in spec.signals:
        raise RequestError(
            "a log of this size is not used without its command",
            where=str(spec.file),
            found="no signals.command",
            expected="the logged command",
            advice="log the command, or write a part of the log out as a log of its own",
        )
    parts = _Parts(spec, rig)
    thinner: _Thinner | None = None
    for log in reader.chunks(spec.file, sources, hints, PART):
        samples = parts.next(log)
        if thinner is None:
            thinner = _Thinner(spec, rig, samples, asked)
        thinner.add(samples)
    if thinner is None:
        raise RecordError("this log has too few samples", where=str(spec.file), found="none", expected="samples")
    return thinner.end(parts.findings)


class _Parts:
    """The parts of a log in order, with one time from its first sample on."""

    def __init__(self, spec: RunSpec, rig: Rig) -> None:
        self._spec, self._rig = spec, rig
        self._begun: Begun | None = None
        self._last: Samples | None = None  # the last sample so far, with its stamp as logged
        self._time = 0.0  # s, of that sample
        self.findings: list[Finding] = []

    def next(self, log: Log) -> Samples:
        """The next part."""
        raw = samples_of(self._spec, self._rig, log, self._begun)
        if self._begun is None:
            self._begun = begin(self._spec, log)
        self._begun = replace(self._begun, samples=self._begun.samples + len(raw.time))
        joined = raw if self._last is None else _joined([self._last, raw])
        found: list[Finding] = []
        ordered = in_order(self._spec, joined, found)
        ordered = ordered.take(slice(0 if self._last is None else 1, None))
        ordered = replace(ordered, time=ordered.time + self._time)
        counted = "" if self._last is None else f", counted from {self._time:.9g} s"
        self.findings += [*log.findings, *(replace(each, where=each.where + counted) for each in found)]
        whole = np.flatnonzero(np.isfinite(raw.time) & np.isfinite(raw.command))
        if len(whole) and len(ordered.time):
            self._last, self._time = raw.take(whole[-1:]), float(ordered.time[-1])
        return ordered


def _joined(parts: Sequence[Samples]) -> Samples:
    def column(name: str) -> FloatArray:
        return np.concatenate([getattr(part, name) for part in parts])

    setpoint = None if any(part.setpoint is None for part in parts) else column("setpoint")
    names = ("logged_command", "logged_response")
    return Samples(column("time"), column("command"), column("response"), setpoint, *(column(name) for name in names))


class _Thinner:
    """Takes the window out of the parts, looks at every sample, and keeps blocks."""

    def __init__(self, spec: RunSpec, rig: Rig, first: Samples, asked: int) -> None:
        self._spec, self._rig = spec, rig
        interval = float(np.median(np.diff(first.time)))
        start, end = spec.from_s or 0.0, math.inf if spec.to_s is None else spec.to_s
        self._start, self._end = start, end
        self._asked = min(asked, max(1, int((min(end, asked * interval) - start) / interval)))
        self._factor = _factor(self._asked, interval, None if rig.setting.continuous else rig.setting.update_interval)
        self._interval = interval
        self._look = PartsLook(rig.response_unit, reading_range(spec.signals["response"], rig.response_unit))
        self._blocks = BlockMeans(self._factor * interval, interval, 5)
        self._kept = _MostMoving(MOST_BLOCKS)
        self._before = spec.command_before
        self._marks: list[Marks] = []
        self._samples = 0

    def add(self, samples: Samples) -> None:
        """The next part."""
        earlier = samples.time < self._start - 1e-9 * max(1.0, self._start)
        if earlier.any():
            self._before = float(samples.command[earlier][-1])
        samples = samples.take(~earlier & (samples.time < self._end))
        if len(samples.time):
            setpoint = np.full(len(samples.time), np.nan) if samples.setpoint is None else samples.setpoint
            columns = np.column_stack([samples.command, setpoint, samples.logged_command, samples.logged_response])
            part = self._look.add(samples.time, samples.command, samples.response, columns)
            self._take(part.time, part.columns, part.response)

    def end(self, said: Sequence[Finding]) -> Taken:
        """What is kept of it, with everything that was found."""
        part = self._look.end()
        if part is None:
            raise RequestError(
                "the window holds no samples",
                where=str(self._spec.file),
                found=f"from {self._spec.from_s} s to {self._spec.to_s} s",
                expected="a part of the log",
            )
        self._take(part.time, part.columns, part.response)
        if self._factor > 1:
            self._kept.add(self._blocks.end())
        rows, before = self._kept.best()
        command = rows.columns[:, 0]
        if self._factor > 1 and self._spec.between_samples != "interpolated":
            command = held(command, self._factor)
        setpoint = rows.columns[:, 1] if "setpoint" in self._spec.signals else None
        response, logged = rows.columns[:, 4], (rows.columns[:, 2], rows.columns[:, 3])
        if self._factor > 1 and self._blocks.share_at_edges < AT_EDGES:
            response = as_drawn(rows.time, response, self._factor * self._interval)
        return Taken(
            Samples(rows.time, command, response, setpoint, *logged),
            self._before if before is None else before,
            (*_merged([*said, *map(finding_of, self._look.seen)]), *self._said(rows.time)),
            between="interpolated" if self._factor > 1 else None,
            marks=np.unique(np.concatenate(self._marks)),
            seen_already=frozenset(SEEN_IN_PARTS),
        )

    def _take(self, time: FloatArray, columns: FloatArray, response: FloatArray) -> None:
        self._samples += len(time)
        self._marks.append(fingerprint(columns[:, 0], response))
        columns = np.column_stack([columns, response])
        self._kept.add(self._blocks.add(time, columns) if self._factor > 1 else Means(time, columns))

    def _said(self, time: FloatArray) -> list[Finding]:
        found = []
        if self._factor > 1:
            found.append(
                Finding(
                    f"read by blocks of {self._factor} samples",
                    "whole record",
                    f"{self._samples} samples, blocks of {self._factor * self._interval:.6g} s",
                    "command and response are the means over them, straight in between",
                )
            )
        if self._kept.left_out:
            found.append(
                Finding(
                    "a part of the record is used",
                    f"{time[0]:.9g} s to {time[-1]:.9g} s",
                    f"{len(time) * self._factor} of {self._samples} samples",
                    "the part in which the command moves most; another one can be chosen with from and to",
                )
            )
        return found


def _factor(samples: int, interval: float, update_interval: float | None) -> int:
    """Samples in a block."""
    if update_interval is None:
        return 1
    most = int(update_interval / (BLOCKS_AN_UPDATE * interval) * (1.0 + 1e-9))
    return max(1, min(most, math.ceil(samples / MOST_BLOCKS / SLACK)))


class _MostMoving:
    """The stretch of at least `most` rows in which the command, the first column, moves most; all where they are fewer.

    Parameters
    ----------
    most : int
    """

    def __init__(self, most: int) -> None:
        self._most = most
        self._window: deque[tuple[Means, float]] = deque()
        self._before: float | None = None
        self._best: tuple[float, list[Means], float | None] = (-1.0, [], None)
        self._last: float | None = None
        self.left_out = False

    def add(self, rows: Means) -> None:
        """The next rows."""
        if len(rows.time) == 0:
            return
        command = rows.columns[:, 0]
        movement = float(np.sum(np.abs(np.diff(command, prepend=command[0] if self._last is None else self._last))))
        self._last = float(command[-1])
        self._window.append((rows, movement))
        size = sum(len(each.time) for each, _ in self._window)
        while size - len(self._window[0][0].time) >= self._most:
            left, _ = self._window.popleft()
            size -= len(left.time)
            self._before = float(left.columns[-1, 0])
            self.left_out = True
        score = sum(movement for _, movement in self._window)
        if not self.left_out or score > self._best[0] * (1.0 + 1e-9):
            self._best = (score, [each for each, _ in self._window], self._before)

    def best(self) -> tuple[Means, float | None]:
        """The rows, and the command before them where they are not the first."""
        _, parts, before = self._best
        time = np.concatenate([part.time for part in parts])
        return Means(time, np.concatenate([part.columns for part in parts])), before


def _merged(findings: Sequence[Finding]) -> list[Finding]:
    """One finding of each kind: the first of the gravest, with how often it was found."""
    kinds: dict[str, list[Finding]] = {}
    for finding in findings:
        kinds.setdefault(finding.kind, []).append(finding)
    return [_together(each) for each in kinds.values()]


def _together(findings: list[Finding]) -> Finding:
    gravest = max(findings, key=lambda each: ("no", "holds", "stops").index(each.refuses))
    if len(findings) == 1:
        return gravest
    more = f"; the same in {len(findings) - 1} other parts, last at {findings[-1].where}"
    return replace(gravest, size=gravest.size + more)
