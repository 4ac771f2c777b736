"""Writes the five samples again: `python -P sample_runs/make.py` (the same bytes every time).

Everything in them is invented; see sample_rigs.py. The rig files beside the logs are written by hand and stay.
"""

import sys
from pathlib import Path

import h5py
import numpy as np

HERE = Path(__file__).resolve().parent
if str(HERE) not in sys.path:
    sys.path.insert(0, str(HERE))

import sample_rigs  # noqa: E402  (beside this file)
from true_rig import Log, open_loop  # noqa: E402

Change = tuple[float, float]


def doublets(rest: float, pulse: float, pause: float, first: float, levels: list[float]) -> list[Change]:
    """Each level for one pulse, its negative for another, then a pause; from the time `first`."""
    changes, t = [], first
    for level in levels:
        changes += [(t, rest + level), (t + pulse, rest - level), (t + 2.0 * pulse, rest)]
        t += 2.0 * pulse + pause
    return changes


def staircase(rest: float, hold: float, first: float, levels: list[float]) -> list[Change]:
    """The levels one after the other, each held."""
    return [(first + k * hold, rest + level) for k, level in enumerate(levels)]


def paddle(folder: Path, plate: float = 1.0, series: int = 1) -> None:
    """Doublets: out and back, so that the paddle stays inside its 300 mm; 5 ms between samples."""
    tests = {
        "doublets_1": doublets(0.03, 0.5, 0.8, 1.0, [1.0, -1.0, 1.4, -1.4, 0.7, -0.7, 1.2]),
        "doublets_2": doublets(0.03, 0.7, 0.8, 1.0, [-1.0, 1.0, -1.5, 1.5, 0.8]),
        "held_out": doublets(0.03, 0.6, 1.0, 1.0, [0.9, -1.3, 1.1, -0.8]),
    }
    for k, (name, changes) in enumerate(tests.items()):
        generator = np.random.default_rng([series, k])
        log = open_loop(sample_rigs.paddle(generator, plate), changes, changes[-1][0] + 1.5, 0.005, generator)
        lines = ["time_s,drive_V,position_mm"]
        lines += [f"{t:.3f},{u:.3f},{y:.3f}" for t, u, y in rows(log)]
        (folder / f"{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")


def oven(folder: Path) -> None:
    """Steps of the heating; 5 s between samples, decimal commas, semicolons and a preamble."""
    tests = {
        "steps_1": staircase(45.0, 1800.0, 900.0, [8.0, 0.0, -8.0, 0.0]),
        "steps_2": staircase(45.0, 1500.0, 900.0, [-6.0, 4.0, 10.0, 3.0, 0.0]),
        "held_out": staircase(45.0, 1700.0, 900.0, [6.0, -7.0, 0.0, 5.0]),
    }
    for k, (name, changes) in enumerate(tests.items()):
        generator = np.random.default_rng([2, k])
        log = open_loop(sample_rigs.oven(generator), changes, changes[-1][0] + 1500.0, 5.0, generator)
        lines = [
            "Curing oven 2, recorder",
            f"Test {k + 1}; door shut; fan on",
            "",
            "time;heating;temperature",
            "s;%;degC",
        ]
        lines += [f"{t:.1f};{u:.2f};{y:.2f}".replace(".", ",") for t, u, y in rows(log)]
        (folder / f"{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")


def mirror(folder: Path, held_out_stiffness: float) -> None:
    """Steps of the coil voltage, each held for ten periods and more; 0.4 ms between samples, HDF5."""
    tests = {
        "steps_1": (staircase(4.0, 0.35, 0.1, [1.0, 0.0, -1.0, 0.0, 0.6]), 1.0),
        "held_out": (staircase(4.0, 0.32, 0.1, [-0.8, 0.5, 0.0, 0.9]), held_out_stiffness),
    }
    for k, (name, (changes, stiffness)) in enumerate(tests.items()):
        generator = np.random.default_rng([3, k])
        rig = sample_rigs.mirror(generator, stiffness)
        write_hdf5(folder / f"{name}.h5", open_loop(rig, changes, changes[-1][0] + 0.4, 0.0004, generator))


def write_hdf5(file: Path, log: Log) -> None:
    """Three datasets with their units; no times of writing, so that the bytes stay the same."""
    with h5py.File(file, "w", track_order=False) as out:
        out.attrs["title"] = "mirror mount, voice coil to tilt; invented data"
        for name, unit, values in (
            ("daq/time", "s", log.time),
            ("daq/coil_voltage", "V", log.command),
            ("daq/tilt", "mrad", log.reading.astype(np.float32)),
        ):
            dataset = out.create_dataset(name, data=values, compression="gzip", track_times=False)
            dataset.attrs["units"] = unit


def rows(log: Log) -> zip:
    """(time, command, reading) of every sample."""
    return zip(log.time.tolist(), log.command.tolist(), log.reading.tolist(), strict=True)


def make(base: Path) -> None:
    """All five samples below `base`."""
    for name in ("paddle", "paddle_heavier", "oven", "mirror", "mirror_loose"):
        (base / name).mkdir(parents=True, exist_ok=True)
    paddle(base / "paddle")
    paddle(base / "paddle_heavier", plate=2.0, series=4)
    oven(base / "oven")
    mirror(base / "mirror", 1.0)
    mirror(base / "mirror_loose", 0.94**2)


if __name__ == "__main__":
    make(HERE)
