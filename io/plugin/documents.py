"""Documents of a bluesky run, fed to an `InProcess` by a plain callable; nothing of bluesky is needed for that."""

import time
import tomllib
import uuid
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from .guard import Guard
from .in_process import ROLES, InProcess
from .jobs import Done


@dataclass(eq=False)
class _Run:
    """One run while its documents come in.

    Attributes
    ----------
    planned : int or None
        Points that its start document promises.
    seen : set of (stream, sequence number)
        A plan that was paused repeats the events since its last checkpoint, with their numbers.
    """

    planned: int | None
    seen: set[tuple[str, int]] = field(default_factory=set)


class Documents:
    """Subscribe it to a RunEngine: ``RE.subscribe(Documents(plugin, rig_file))``.

    A call copies the document and returns; it never raises and never waits. The rig file's sources are the data keys.
    Times are the data of the time's source where it is one, else the response's timestamps. A run whose `num_points`
    were not reached, whose stop document says anything but success, or that lost events was stopped early.

    Parameters
    ----------
    plugin : InProcess
    rig_file : Path
    """

    def __init__(self, plugin: InProcess, rig_file: Path) -> None:
        self._plugin, self._rig_file = plugin, Path(rig_file)
        self._guard = Guard()
        self._runs: dict[str, _Run] = {}
        self._stream_of: dict[str, tuple[str, str]] = {}
        self._signals: dict[str, dict[str, Any]] | None = None

    @property
    def faults(self) -> tuple[str, ...]:
        """What went wrong on the caller's side, as tracebacks."""
        return tuple(self._guard.faults)

    def __call__(self, name: str, document: Mapping[str, Any]) -> None:
        """Take a document."""
        with self._guard:
            kept = copied(document)
            self._plugin.post(lambda: self._take(name, kept))

    def _take(self, name: str, document: dict[str, Any]) -> None:
        """On the plug-in's thread."""
        if name == "start":
            planned = document.get("num_points")
            self._runs[document["uid"]] = _Run(planned if isinstance(planned, int) else None)
            self._plugin.start(_name_of(document), run=document["uid"])
        elif name == "descriptor":
            self._stream_of[document["uid"]] = (document["run_start"], document.get("name", "primary"))
        elif name == "event":
            self._event(document)
        elif name == "event_page":
            for event in events_of(document):
                self._event(event)
        elif name == "stop":
            self._stop(document)

    def _event(self, event: dict[str, Any]) -> None:
        uid, stream = self._stream_of[event["descriptor"]]
        signals = self._sources()
        data = event["data"]
        keys = {role: signals[role]["source"] for role in ROLES if role in signals}
        if not {keys["command"], keys["response"]} <= data.keys():
            return
        row = {role: data[key] for role, key in keys.items() if key in data}
        row["time"] = self._time(event, row["response"], keys["response"])
        number = (stream, event["seq_num"])
        self._runs[uid].seen.add(number)
        self._plugin.sample(row["time"], row["command"], row["response"], row.get("setpoint"), run=uid, number=number)

    def _time(self, event: dict[str, Any], response: Any, key: str) -> Any:
        """s; from the data, from the rate of the rig file, or the timestamps of the response."""
        signal = self._sources()["time"]
        source = signal.get("source")
        if source in event["data"]:
            from .. import units

            return np.asarray(event["data"][source], dtype=np.float64) * units.difference_factor(
                signal.get("unit", "s"), "s"
            )
        stamp = event["timestamps"][key]
        if np.ndim(response) == 1 and np.ndim(stamp) == 0:
            if "sample_rate" not in signal:
                raise ValueError("an array of samples needs the time's source among the data, or a sample_rate")
            from ..units import difference_factor, read_quantity

            rate = read_quantity(signal["sample_rate"])
            return float(stamp) + np.arange(len(response)) / (rate.value * difference_factor(rate.unit, "Hz"))
        return stamp

    def _stop(self, document: dict[str, Any]) -> None:
        uid = document["run_start"]
        run = self._runs.pop(uid)
        why = _stopped_because(document, run)
        self._plugin.end(complete=not why, why=why, run=uid)

    def _sources(self) -> dict[str, dict[str, Any]]:
        if self._signals is None:
            self._signals = tomllib.loads(self._rig_file.read_text("utf-8-sig"))["signals"]
        return self._signals


def _stopped_because(document: dict[str, Any], run: _Run) -> str:
    """Why a run is not whole, whatever its exit status says; empty for a whole one."""
    if document.get("exit_status") != "success":
        return f"exit status {document.get('exit_status')}: {document.get('reason') or 'no reason given'}"
    counted: dict[str, int] = {}
    for stream, _ in run.seen:
        counted[stream] = counted.get(stream, 0) + 1
    for stream, count in counted.items():
        told = (document.get("num_events") or {}).get(stream)
        if told is not None and told > count:
            return f"{told - count} of {told} events were lost"
        if run.planned is not None and count < run.planned:
            return f"{count} of {run.planned} planned points"
    return ""


def _name_of(start: dict[str, Any]) -> str:
    number = start.get("scan_id")
    plan = start.get("plan_name", "run")
    return f"{plan}_{number}" if number is not None else f"{plan}_{start['uid'][:8]}"


def events_of(page: dict[str, Any]) -> Iterator[dict[str, Any]]:
    """The events of an event page; each with its own timestamps."""
    for index, number in enumerate(page["seq_num"]):
        yield {
            "descriptor": page["descriptor"],
            "seq_num": number,
            "data": {key: values[index] for key, values in page["data"].items()},
            "timestamps": {key: values[index] for key, values in page["timestamps"].items()},
        }


def copied(value: Any) -> Any:
    """A copy of a document that its host may change as it likes.

    Examples
    --------
    >>> document = {"data": {"y": [1.0]}}
    >>> kept = copied(document)
    >>> document["data"]["y"].append(2.0)
    >>> kept
    {'data': {'y': [1.0]}}
    """
    if isinstance(value, Mapping):
        return {key: copied(each) for key, each in value.items()}
    if isinstance(value, (list, tuple)):
        return [copied(each) for each in value]
    return value.copy() if isinstance(value, np.ndarray) else value


def as_run(done: Done, measured: str) -> list[tuple[str, dict[str, Any]]]:
    """A result as the documents of a new run that says of which run it is the analysis; the closed run stays as it is.

    Parameters
    ----------
    done : Done
    measured : str
        uid of the run that was measured.

    Returns
    -------
    list of (name, document)
    """
    now = time.time()
    start, descriptor = str(uuid.uuid4()), str(uuid.uuid4())
    data = {"code": done.code, "status": done.status, "said": done.said, "controller": done.controller}
    keys: dict[str, Any] = {
        key: {"source": "gainwright", "dtype": "integer" if key == "code" else "string", "shape": []} for key in data
    }
    return [
        (
            "start",
            {
                "uid": start,
                "time": now,
                "analysis_of": [measured],
                "plan_name": "gainwright",
                "results": str(done.folder),
            },
        ),
        ("descriptor", {"uid": descriptor, "run_start": start, "time": now, "name": "primary", "data_keys": keys}),
        (
            "event",
            {
                "uid": str(uuid.uuid4()),
                "descriptor": descriptor,
                "time": now,
                "seq_num": 1,
                "data": data,
                "timestamps": dict.fromkeys(data, now),
            },
        ),
        (
            "stop",
            {
                "uid": str(uuid.uuid4()),
                "run_start": start,
                "time": now,
                "exit_status": "success",
                "num_events": {"primary": 1},
            },
        ),
    ]
