"""A long log inspected and fitted in bounded memory: `python -P tests/scale/long_record.py --samples 1e8 --fit`.

The log is made in a folder of its own, read through a rig file, and removed. What is printed belongs into RESULTS.md.
"""

import argparse
import datetime
import os
import platform
import resource
import shutil
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from scipy.signal import lfilter

sys.path.insert(0, str(Path(__file__).resolve().parent))

from long_log import DEAD_TIME, GAIN, INTERVAL, LAGS, NOISE, SLOW_LAG, SLOW_NOISE, rig_text, write_hdf5

SPARE = 2.0  # times the log's size that must be free


def peak_mb(who: int = resource.RUSAGE_SELF) -> float:
    """Largest resident memory so far, MB."""
    return resource.getrusage(who).ru_maxrss / 1024.0


def step(name: str, begun: tuple[float, float]) -> None:
    """One line: CPU and wall time since `begun`, and the peak of memory here and in the reading child."""
    cpu, wall = time.process_time() - begun[0], time.perf_counter() - begun[1]
    print(
        f"{name}: {cpu:.1f} s CPU, {wall:.1f} s wall; peak {peak_mb():.0f} MB, reading child"
        f" {peak_mb(resource.RUSAGE_CHILDREN):.0f} MB",
        flush=True,
    )


def now() -> tuple[float, float]:
    return time.process_time(), time.perf_counter()


def noise_of(stamps: np.ndarray, command: np.ndarray, response: np.ndarray) -> tuple[float, float]:
    """Rms of what the true plant leaves of the blocks, and what the log's noise has to leave; mm.

    The plant by partial fractions, each lag exact for a straight command (first-order hold); the means of white noise
    and of a lag's noise over n samples, which the line through the blocks makes smaller by sinc^2 on the way.
    """
    length = float(np.median(np.diff(stamps)))
    samples = round(length / INTERVAL)
    late = round(DEAD_TIME / length)
    delayed = np.concatenate([np.zeros(late), command])[: len(command)]
    slow, fast = LAGS
    left = response - np.median(response)
    for lag, weight in ((slow, slow / (slow - fast)), (fast, -fast / (slow - fast))):
        pole = np.exp(-length / lag)
        ratio = lag / length * (1.0 - pole)
        left = left - GAIN * weight * lfilter([1.0 - ratio, ratio - pole], [1.0, -pole], delayed)
    pole = np.exp(-INTERVAL / SLOW_LAG)
    apart = np.arange(-4 * samples, 4 * samples + 1)
    covariance = SLOW_NOISE**2 * pole ** np.abs(apart) + NOISE**2 * (apart == 0)
    box = np.ones(samples) / samples
    drawn = np.zeros(2 * samples + 1)
    drawn[[0, samples, 2 * samples]] = 1.0 / 12.0, 10.0 / 12.0, 1.0 / 12.0
    weights = np.convolve(box, drawn)
    own = np.convolve(weights, weights[::-1])
    middle = len(own) // 2
    reach = min(middle, len(apart) // 2)
    inside = slice(middle - reach, middle + reach + 1)
    at = slice(len(apart) // 2 - reach, len(apart) // 2 + reach + 1)
    return float(np.std(left)), float(np.sqrt(np.sum(own[inside] * covariance[at])))


def make(path: Path, samples: int) -> None:
    """The log, made by a process of its own so that its memory is not counted here."""
    need = SPARE * 12 * samples
    if shutil.disk_usage(path.parent).free < need:
        sys.exit(f"{path.parent} has not the {need / 1e9:.1f} GB that a log of {samples} samples wants")
    child = os.fork()
    if child == 0:
        write_hdf5(path, samples, 1)
        os._exit(0)
    if os.waitpid(child, 0)[1] != 0:
        sys.exit("the log could not be made")


def run(folder: Path, samples: int, *, fit: bool) -> None:
    """Make, inspect, read, and fit."""
    make(folder / "long.h5", samples)
    (folder / "rig.toml").write_text(rig_text("long.h5"), "utf-8")
    from gainwright.io.inspection import inspect_log
    from gainwright.io.read_record import read_record
    from gainwright.io.rigfile.load import load_rig

    print(f"{samples} samples, {(folder / 'long.h5').stat().st_size / 1e6:.0f} MB")
    step("start", now())
    begun = now()
    found = inspect_log(folder / "long.h5")
    step("inspected", begun)
    print("  " + "\n  ".join(found.text.splitlines()[1:]))
    rig = load_rig(folder / "rig.toml")
    begun = now()
    record = read_record(rig.runs[0], rig)
    step("read", begun)
    print(f"  {len(record.run.time)} blocks")
    noise, expected = noise_of(record.run.time, record.run.command, record.run.response)
    print(f"  noise of a block {noise:.5f} mm, made with {expected:.5f} mm")
    for finding in record.findings:
        print(f"  {finding.text}")
    if fit:
        from gainwright.ident.identify import identify

        begun = now()
        fitted = identify([record.run])
        step("fitted", begun)
        print(f"  {fitted.structure}; true: gain {GAIN} mm/V, lags {LAGS} s, dead time {DEAD_TIME} s")
        for each in fitted.parameters:
            print(f"  {each.name}: {each.value:.6g}, standard error {each.std_error:.2g}")


def main() -> None:
    """The command."""
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--samples", type=float, default=1e8)
    asked.add_argument("--fit", action="store_true", help="also fit the plant")
    asked.add_argument("--folder", type=Path, help="where the log is made; default: a temporary folder")
    given = asked.parse_args()
    print(f"{datetime.date.today()}, Python {platform.python_version()}, numpy {np.__version__}, {platform.machine()}")
    with tempfile.TemporaryDirectory(dir=given.folder) as folder:
        run(Path(folder), int(given.samples), fit=given.fit)


if __name__ == "__main__":
    main()
