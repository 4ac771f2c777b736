"""From a log to a record: units, clock, window, lost samples, and copies found under other names."""

import hashlib
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
from gainwright.design.requirements import ControllerSetting, Limits, Requirements
from gainwright.ident.errors import RecordError, RequestError
from gainwright.io.read_record import read_record, shares_samples
from gainwright.io.record import Record
from gainwright.io.rigfile.rig import LogDialect, Rig, RunSpec, Signal

INTERVAL = 0.02
SIGNALS = {"time": Signal("t", "s"), "command": Signal("u", "V"), "response": Signal("y", "mm")}


def lag_log(seed: int, count: int = 400, noise: float = 0.05) -> np.ndarray:
    """(count, 3) time in s, command in V, response in mm: a lag of 0.4 s, 5 mm/V, noise of 0.05 mm, doublets of 1 V."""
    rng = np.random.default_rng(seed)
    time = INTERVAL * np.arange(count)
    command = np.where(time < 1.0, 0.0, np.where(time % 4.0 < 2.0, 1.0, -1.0))
    response = np.zeros(count)
    pole = np.exp(-INTERVAL / 0.4)
    for k in range(1, count):
        response[k] = pole * response[k - 1] + 5.0 * (1.0 - pole) * command[k - 1]
    return np.column_stack([time, command, response + noise * rng.standard_normal(count)])


def write(path: Path, rows: np.ndarray, header: str = "t,u,y", show: str = "%.17g") -> Path:
    """Write rows as CSV, every digit by default."""
    np.savetxt(path, rows, fmt=show, delimiter=",", header=header, comments="", encoding="utf-8")
    return path


def spec_of(path: Path, **changes: object) -> RunSpec:
    """A run to fit of this file."""
    spec = RunSpec(path, path.name, "fit", "open", "auto", "auto", dict(SIGNALS))
    return replace(spec, **changes)  # type: ignore[arg-type]


def rig_of(path: Path) -> Rig:
    """A rig with V and mm."""
    return Rig("a rig", path, "", "V", "mm", dict(SIGNALS), (), LogDialect(), ControllerSetting(0.01), Requirements(),
               Limits())  # fmt: skip


def read(path: Path, **changes: object) -> Record:
    """Read one file as a run."""
    return read_record(spec_of(path, **changes), rig_of(path))


def kinds(record: Record) -> dict[str, str]:
    """What was found, and what each finding refuses."""
    return {finding.kind: finding.refuses for finding in record.findings}


@pytest.fixture
def clean(tmp_path: Path) -> Path:
    """8 s of a lag at 50 Hz with its noise."""
    return write(tmp_path / "run_1.csv", lag_log(1))


def test_a_clean_log_is_read_without_a_finding(clean: Path) -> None:
    """Samples as logged, the hash of the bytes, and nothing to say."""
    rows = lag_log(1)
    record = read(clean)
    np.testing.assert_array_equal(record.run.response, rows[:, 2])
    np.testing.assert_array_equal(record.run.command, rows[:, 1])
    np.testing.assert_allclose(record.run.time, rows[:, 0], atol=1e-12)
    assert record.sha256 == hashlib.sha256(clean.read_bytes()).hexdigest()
    assert record.findings == ()


def test_scale_offset_and_lost_values_act_on_the_logged_number(tmp_path: Path) -> None:
    """reading = 2 * logged + 10 mm; a logged 0 is lost and does not become 10 mm."""
    rows = lag_log(1)
    rows[100, 2] = 0.0
    signals = {**SIGNALS, "response": Signal("y", "mm", scale=2.0, offset=10.0, lost_as=(0.0,))}
    record = read(write(tmp_path / "a.csv", rows), signals=signals)
    assert np.flatnonzero(np.isnan(record.run.response)).tolist() == [100]
    good = np.isfinite(record.run.response)
    np.testing.assert_allclose(record.run.response[good], 2.0 * rows[good, 2] + 10.0, rtol=1e-15)


def test_a_log_in_other_units_is_converted(tmp_path: Path) -> None:
    """One run logs cm, ms and mV in its header; readings arrive in mm, s and V."""
    rows = lag_log(1) * np.array([1000.0, 1000.0, 0.1])
    signals = {role: replace(signal, unit=None) for role, signal in SIGNALS.items()}
    record = read(write(tmp_path / "a.csv", rows, "t [ms],u [mV],y [cm]"), signals=signals)
    np.testing.assert_allclose(record.run.response, lag_log(1)[:, 2], rtol=1e-12)
    np.testing.assert_allclose(record.run.command, lag_log(1)[:, 1], rtol=1e-12)
    assert record.run.time[-1] == pytest.approx(INTERVAL * 399, rel=1e-12)


@pytest.mark.parametrize(
    ("header", "what"), [("t [ms],u,y", "time"), ("t,u [mV],y", "command"), ("t,u,y [cm]", "response")]
)
def test_a_log_that_contradicts_the_rig_file_is_refused(tmp_path: Path, header: str, what: str) -> None:
    """ms read as s would pass every later check."""
    with pytest.raises(RequestError, match=f"different units of the {what}"):
        read(write(tmp_path / "a.csv", lag_log(1), header))


def test_a_unit_that_nobody_states_is_refused(clean: Path) -> None:
    """Neither the rig file nor the log says it."""
    with pytest.raises(RequestError, match="neither the rig file nor this log states the unit of the time"):
        read(clean, signals={**SIGNALS, "time": Signal("t")})


def test_a_missing_column_is_answered_with_the_nearest(clean: Path) -> None:
    """The rig file says "yy"."""
    with pytest.raises(RequestError, match=r'"yy"[\s\S]*did you mean "y"'):
        read(clean, signals={**SIGNALS, "response": Signal("yy", "mm")})


def test_a_time_can_be_made_from_the_sample_rate(clean: Path) -> None:
    """100 Hz in place of the column."""
    record = read(clean, signals={**SIGNALS, "time": Signal(None, "s", sample_rate=100.0)})
    np.testing.assert_allclose(np.diff(record.run.time), 0.01, rtol=1e-9)


def test_a_window_is_half_open_and_knows_the_command_before_it(clean: Path) -> None:
    """2 s to 4 s at 50 Hz: 100 samples, the first at 2 s; the command before it was the one at 1.98 s."""
    record = read(clean, from_s=2.0, to_s=4.0)
    rows = lag_log(1)
    np.testing.assert_array_equal(record.run.response, rows[100:200, 2])
    assert record.run.time[0] == 0.0
    assert record.run.command_before == rows[99, 1]
    assert read(clean, command_before=0.5).run.command_before == 0.5
    with pytest.raises(RequestError, match="the window holds no samples"):
        read(clean, from_s=100.0)


def test_epoch_stamps_count_from_the_first_and_must_fit_their_unit(tmp_path: Path) -> None:
    """1.7e9 s is a date; 1.7e12 in "s" can only be ms."""
    rows = lag_log(1)
    shifted = rows + np.array([1.7e9, 0.0, 0.0])
    record = read(write(tmp_path / "a.csv", shifted))
    np.testing.assert_allclose(record.run.time, rows[:, 0], atol=1e-6)  # float64 keeps 2.4e-7 s there
    with pytest.raises(RequestError, match="too large for their unit"):
        read(write(tmp_path / "b.csv", rows * 1000.0 + np.array([1.7e12, 0.0, 0.0])))


def test_stamps_rounded_to_ms_get_the_even_time_base(tmp_path: Path) -> None:
    """3.2 ms sampling stamped to 1 ms: the even base is found, and said."""
    rows = lag_log(1)
    rows[:, 0] = np.round(0.0032 * np.arange(400), 3)
    record = read(write(tmp_path / "a.csv", rows))
    np.testing.assert_allclose(record.run.time, 0.0032 * np.arange(400), atol=2e-5)
    assert kinds(record) == {"rounded stamps": "no"}


def test_lost_commands_are_left_out(tmp_path: Path) -> None:
    """Three samples without a command go; most of them lost is an error."""
    rows = lag_log(1)
    rows[50:53, 1] = np.nan
    record = read(write(tmp_path / "a.csv", rows))
    assert len(record.run.time) == 397
    assert kinds(record)["lost commands"] == "no"
    rows[50:300, 1] = np.nan
    with pytest.raises(RecordError, match="lost in too many samples"):
        read(write(tmp_path / "b.csv", rows))


def test_a_fit_run_whose_command_never_moves_stops_and_a_held_out_one_holds(tmp_path: Path) -> None:
    """Nothing can be learned from it; as a held-out run it just confirms nothing."""
    rows = lag_log(1)
    rows[:, 1] = 2.0
    path = write(tmp_path / "a.csv", rows)
    with pytest.raises(RecordError, match=r"idle command[\s\S]*move the command"):
        read(path)
    assert kinds(read(path, use="held-out"))["idle command"] == "holds"


def test_a_sensor_at_the_end_of_its_declared_range_holds(tmp_path: Path) -> None:
    """The range says 4 mm; readings stand there."""
    rows = lag_log(1)
    rows[:, 2] = np.minimum(rows[:, 2], 4.0)
    signals = {**SIGNALS, "response": Signal("y", "mm", lowest=-10.0, highest=4.0)}
    assert kinds(read(write(tmp_path / "a.csv", rows), signals=signals)) == {"clipping": "holds"}


def test_unequal_clocks_of_one_file_are_refused(tmp_path: Path) -> None:
    """Two NXlog groups whose times differ by half a sample."""
    rows = lag_log(1)
    path = tmp_path / "a.nxs"
    with h5py.File(path, "w") as file:
        for name, column, shift in (("u", 1, 0.0), ("y", 2, 0.01 * np.arange(400) / 400)):
            group = file.create_group(name)
            group.attrs["NX_class"] = "NXlog"
            group["value"], group["time"] = rows[:, column], rows[:, 0] + shift
    signals = {"time": Signal("u/time", "s"), "command": Signal("u", "V"), "response": Signal("y", "mm")}
    with pytest.raises(RecordError, match="keeps another time"):
        read(path, signals=signals)


def test_the_same_samples_have_one_hash_under_any_name_format_and_clock(tmp_path: Path, clean: Path) -> None:
    """CSV, HDF5 and a CSV whose clock starts elsewhere and counts ms."""
    rows = lag_log(1)
    other = tmp_path / "held_out.h5"
    with h5py.File(other, "w") as file:
        for name, column in zip("tuy", rows.T, strict=True):
            file[name] = column
    third = write(tmp_path / "third.csv", rows * np.array([1000.0, 1.0, 1.0]) + np.array([5000.0, 0.0, 0.0]))
    signals = {**SIGNALS, "time": Signal("t", "ms")}
    hashes = {read(clean).samples_sha256, read(other).samples_sha256, read(third, signals=signals).samples_sha256}
    assert len(hashes) == 1
    assert read(write(tmp_path / "fresh.csv", lag_log(2))).samples_sha256 not in hashes


def test_a_window_and_a_file_of_its_samples_alone_have_one_hash(tmp_path: Path, clean: Path) -> None:
    """The hash is of the samples that are used, wherever they stood in their log."""
    part = write(tmp_path / "part.csv", lag_log(1)[150:250])
    assert read(clean, from_s=3.0, to_s=5.0).samples_sha256 == read(part).samples_sha256


COPIES = {
    "another name": lambda rows: rows,
    "a part with a shifted clock": lambda rows: rows[150:260] - np.array([rows[150, 0], 0.0, 0.0]),
    "forty samples in the middle of another record": lambda rows: np.vstack(
        [lag_log(5)[:100], rows[120:160], lag_log(6)[140:]]) * [0, 1, 1] + lag_log(1)[:400, :1] * [1, 0, 0],
    "fewer digits": lambda rows: np.round(rows, 3),
    "every second sample": lambda rows: rows[::2],
    "every third sample from the second on": lambda rows: rows[1::3],
    "rescaled": lambda rows: rows * np.array([1.0, 1.0, 1.0 + 1e-12]),
}  # fmt: skip


@pytest.mark.parametrize("name", COPIES)
def test_a_copied_stretch_is_found(name: str, tmp_path: Path, clean: Path) -> None:
    """Whatever was done to hide it."""
    copy = write(tmp_path / "fresh.csv", COPIES[name](lag_log(1)))
    assert shares_samples(read(clean), read(copy, use="held-out"))
    assert shares_samples(read(copy, use="held-out"), read(clean))


@pytest.mark.parametrize("quantum", [0.0, 0.01, 0.05, 0.2, 1.0])
@pytest.mark.parametrize("noise", [0.02, 0.05, 0.2])
def test_a_fresh_run_of_the_same_test_is_no_copy(quantum: float, noise: float, tmp_path: Path) -> None:
    """The same commands, fresh noise, readings rounded to up to fifty times the noise: nothing is shared."""
    records = []
    for seed in range(3):
        rows = lag_log(seed, noise=noise)
        if quantum:
            rows[:, 2] = np.round(rows[:, 2] / quantum) * quantum
        records.append(read(write(tmp_path / f"{seed}.csv", rows)))
    assert not shares_samples(records[0], records[1])
    assert not shares_samples(records[1], records[2])
