"""The five samples: what is in the repository is what make.py writes, and it is what the samples say they are."""

import ast
from pathlib import Path

import h5py
import make
import numpy as np
import pytest

REPOSITORY = Path(__file__).resolve().parents[2]
SAMPLES = REPOSITORY / "sample_runs"
SEPARATORS = {"paddle": (",", 1), "paddle_heavier": (",", 1), "oven": (";", 5)}


def read(file):
    """(n, 3) time, command, response, by means of our own."""
    if file.suffix == ".h5":
        with h5py.File(file) as source:
            return np.column_stack([source[f"daq/{name}"][:] for name in ("time", "coil_voltage", "tilt")])
    separator, skipped = SEPARATORS[file.parent.name]
    lines = file.read_text(encoding="utf-8").splitlines()[skipped:]
    if separator == ";":
        lines = [line.replace(",", ".") for line in lines]
    return np.array([[float(part) for part in line.split(separator)] for line in lines])


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    base = tmp_path_factory.mktemp("samples")
    make.make(base)
    return base


def runs():
    return sorted(path for path in SAMPLES.glob("*/*") if path.suffix in (".csv", ".h5"))


def test_making_the_samples_again_gives_the_same_records(made):
    """Text files byte for byte, HDF5 by its datasets; and no run is missing or extra."""
    assert {p.relative_to(made) for p in made.glob("*/*")} == {p.relative_to(SAMPLES) for p in runs()}
    for path in runs():
        again = made / path.relative_to(SAMPLES)
        if path.suffix == ".csv":
            assert again.read_bytes() == path.read_bytes()
        else:
            assert np.array_equal(read(again), read(path))


def test_the_samples_are_small_and_long_enough():
    """Under 5 MB together; each record 1,400 to 6,000 samples at a constant interval."""
    assert sum(path.stat().st_size for path in runs()) < 5e6
    for path in runs():
        time = read(path)[:, 0]
        assert 1400 <= len(time) <= 6000
        assert np.allclose(np.diff(time), time[1] - time[0], rtol=1e-6)


def test_the_paddle_stays_on_its_cylinder_and_comes_back():
    """Doublets inside 0 to 300 mm with room to spare, ending within 3 mm of where they began."""
    for path in SAMPLES.glob("paddle*/*.csv"):
        position = read(path)[:, 2]
        assert position.min() > 50.0
        assert position.max() < 250.0
        assert abs(position[-1] - position[0]) < 3.0


def test_the_oven_is_only_heated():
    """Heating between 0 and 100 %, and a dead time one can see: nothing happens within 20 s of the first step."""
    for path in (SAMPLES / "oven").glob("*.csv"):
        time, heating, temperature = read(path).T
        assert heating.min() >= 0.0
        assert heating.max() <= 100.0
        first = time[np.flatnonzero(np.diff(heating))[0] + 1]
        still = temperature[(time > first - 300.0) & (time < first + 20.0)]
        assert np.ptp(still) < 8 * 0.08  # noise of 0.08 K, either side of its mean


def ringing(file):
    """Frequency (Hz) of the ringing behind the largest step, by the peak of a windowed and padded transform."""
    time, command, response = read(file).T
    edges = [*(np.flatnonzero(np.diff(command)) + 1), len(time)]
    start = max(edges[:-1], key=lambda k: abs(command[k] - command[k - 1]))
    stop = next(edge for edge in edges if edge > start)
    tail = response[start + 20 : stop] - response[start + 20 : stop].mean()
    size = np.abs(np.fft.rfft(tail * np.hanning(len(tail)), 2**17))
    return np.argmax(size) / (2**17 * (time[1] - time[0]))


def test_the_loose_clamp_lowers_the_frequency_by_six_per_cent_in_the_held_out_run_only():
    """38 Hz everywhere but in the held-out run of the loose mount, which rings at 0.94 of it."""
    sound = ringing(SAMPLES / "mirror" / "held_out.h5")
    assert sound == pytest.approx(38.0, rel=0.01)  # the ringing lasts 8 periods: its peak is known to about 1 %
    assert ringing(SAMPLES / "mirror_loose" / "steps_1.h5") == pytest.approx(38.0, rel=0.01)
    assert ringing(SAMPLES / "mirror_loose" / "held_out.h5") / sound == pytest.approx(0.94, abs=0.01)


def imported(file):
    """Top-level names that a file imports."""
    for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name.split(".")[0] for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.level == 0:
            yield node.module.split(".")[0]


def test_the_true_rigs_import_nothing_of_the_program_they_judge():
    """numpy, and h5py where files are written, beside the standard library."""
    truth = [*SAMPLES.rglob("*.py")]
    assert len(truth) >= 8
    for file in truth:
        assert not {"gainwright", "ident", "design", "scipy", "lmfit"} & set(imported(file)), file
    for file in (REPOSITORY / "tests" / "campaign" / "proof").glob("*.py"):
        assert "gainwright" not in set(imported(file)), file
