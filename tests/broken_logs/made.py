"""A sound log and the ways to spoil it; every file is written here and nothing is read by the code under test."""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import h5py
import numpy as np

COUNT, INTERVAL = 1200, 0.01
TIME = INTERVAL * np.arange(COUNT)
COMMAND = np.select([TIME < 1.0, TIME < 4.0, TIME < 7.0, TIME < 9.5], [0.0, 1.0, -1.0, 0.5], 0.0)


def answer(command: np.ndarray, gain: float = 10.0, lag: float = 0.3, delay: int = 4) -> np.ndarray:
    """A lag with dead time in closed form, from held commands: y[k+1] = p y[k] + gain (1 - p) u[k - delay]."""
    pole, level, values = np.exp(-INTERVAL / lag), 0.0, []
    for wanted in np.concatenate([np.full(delay, command[0]), command])[: len(command)]:
        values.append(level)
        level = pole * level + gain * (1.0 - pole) * wanted
    return np.array(values)


def noise(deviation: float = 0.05, seed: int = 3, count: int = COUNT) -> np.ndarray:
    return np.random.default_rng(seed).normal(0.0, deviation, count)


RESPONSE = answer(COMMAND) + noise()


@dataclass(frozen=True)
class Broken:
    """One broken log.

    Attributes
    ----------
    write : callable
        Writes the log into a folder and returns its path.
    finds : str
        The finding's kind, or words of the error.
    refuses : str
        "no", "holds", "stops" (a finding that stops), or "error" (it can't be read at all).
    rig : dict
        What the rig file says differently: old text to new text.
    """

    write: Callable[[Path], Path]
    finds: str
    refuses: str
    rig: tuple[tuple[str, str], ...] = ()


def rows(time: np.ndarray, command: np.ndarray, response: np.ndarray, digits: str = ".10g") -> list[str]:
    """Lines of a text log; a value that is not finite is an empty cell."""

    def cell(value: float) -> str:
        return format(value, digits) if np.isfinite(value) else ""

    return [",".join(map(cell, row)) for row in zip(time, command, response, strict=True)]


def text(lines: list[str], header: str = "t,u,y", end: str = "\n") -> Callable[[Path], Path]:
    """A text log of these lines."""
    return raw(("\n".join([header, *lines]) + end).encode())


def raw(content: bytes, name: str = "log.csv") -> Callable[[Path], Path]:
    """A file of these bytes."""

    def write(folder: Path) -> Path:
        (folder / name).write_bytes(content)
        return folder / name

    return write


def log(
    time: np.ndarray = TIME, command: np.ndarray = COMMAND, response: np.ndarray = RESPONSE
) -> Callable[[Path], Path]:
    """A text log of these signals."""
    return text(rows(time, command, response))


def spoiled(signal: np.ndarray, places: object, value: object) -> np.ndarray:
    """A copy with some samples changed."""
    changed = signal.copy()
    changed[places] = value  # type: ignore[index]
    return changed


def hdf5(spoil: Callable[[h5py.File], None] | None = None, **channels: np.ndarray) -> Callable[[Path], Path]:
    """An HDF5 log with datasets t, u and y, changed before it is closed."""

    def write(folder: Path) -> Path:
        path = folder / "log.h5"
        with h5py.File(path, "w") as file:
            for name, values in {"t": TIME, "u": COMMAND, "y": RESPONSE, **channels}.items():
                file[name] = values
            if spoil is not None:
                spoil(file)
        return path

    return write


def cut(write: Callable[[Path], Path], keep: float) -> Callable[[Path], Path]:
    """Only the first part of a file's bytes."""

    def written(folder: Path) -> Path:
        path = write(folder)
        content = path.read_bytes()
        path.write_bytes(content[: int(keep * len(content))])
        return path

    return written


def replaced(spoil: Callable[[h5py.File], None]) -> Callable[[h5py.File], None]:
    """The response taken away before it is put back in a broken way."""

    def change(file: h5py.File) -> None:
        del file["y"]
        spoil(file)

    return change
