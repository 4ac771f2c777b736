"""Interrupted, ended or killed at any moment: nothing lost, nothing half-written, and the next run as the first."""

import json
import signal
import subprocess
import time
from pathlib import Path

import h5py
import numpy as np
import pytest
from little_rig import PROGRAM, write_rig

ENDINGS = (signal.SIGINT, signal.SIGTERM, signal.SIGKILL)
MOSTLY_HIDDEN = ".gainwright"  # the lock and the parts that a killed job may leave; the next one clears them


def stop_at(call: list[str], seconds: float, ending: signal.Signals) -> tuple[int, str]:
    """Start the program, send it the signal after some time, and wait for its end; exit code and what it said."""
    with subprocess.Popen(call, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as program:
        try:
            program.wait(timeout=seconds)
        except subprocess.TimeoutExpired:
            program.send_signal(ending)
        said = program.communicate(timeout=200)
    return program.returncode, "".join(said)


def full_length(call: list[str]) -> float:
    begin = time.monotonic()
    subprocess.run(call, capture_output=True, timeout=250, check=False)
    return time.monotonic() - begin


def no_fault(code: int, said: str) -> None:
    """Before our own code runs, Python itself may tell of the interrupt; that is none of ours."""
    assert code in (0, 3, 130, -signal.SIGINT, -signal.SIGTERM, -signal.SIGKILL), said
    assert "a fault of the program itself" not in said


def test_a_draft_is_whole_or_absent(tmp_path: Path, untouched) -> None:
    """Six moments spread over the length of one draft, two of each kind of ending."""
    log, *_ = write_rig(tmp_path / "logs")
    untouched(log)
    whole = tmp_path / "whole.toml"
    length = full_length([*PROGRAM, "draft", str(log), "--out", str(whole)])
    generator = np.random.default_rng(1)
    for number in range(6):
        out = tmp_path / f"{number}.toml"
        call = [*PROGRAM, "draft", str(log), "--out", str(out)]
        code, said = stop_at(call, generator.uniform(0.3, 1.05) * length, ENDINGS[number % 3])
        no_fault(code, said)
        assert not out.exists() or out.read_text() == whole.read_text()


def test_an_interrupted_command_says_so_and_ends_with_130(tmp_path: Path, untouched) -> None:
    """SIGTERM as well as Control-C, once its work has begun; the folder made for the results is gone again."""
    logs = write_rig(tmp_path)
    untouched(*logs)
    for ending in (signal.SIGINT, signal.SIGTERM):
        call = [*PROGRAM, "process", str(tmp_path / "rig.toml"), "--no-report"]
        with subprocess.Popen(call, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as program:
            assert program.stderr is not None
            while "fitting" not in program.stderr.readline():
                assert program.poll() is None
            program.send_signal(ending)
            said = program.communicate(timeout=100)[1]
        assert program.returncode == 130, said
        assert said.endswith("interrupted\n")
        assert not (tmp_path / "out").exists()


@pytest.mark.faults
@pytest.mark.timeout(3600)
@pytest.mark.parametrize("ending", ENDINGS, ids=lambda ending: ending.name)
def test_a_job_interrupted_at_twenty_moments_leaves_whole_results_or_none(
    tmp_path: Path, untouched, ending: signal.Signals
) -> None:
    """An earlier sheet is current, set aside or replaced, and always whole; the last run ends as the first did."""
    logs = write_rig(tmp_path)
    untouched(*logs)
    out = tmp_path / "out"
    call = [*PROGRAM, "process", str(tmp_path / "rig.toml"), "--no-report"]
    length = full_length(call)
    first = json.loads((out / "gains.json").read_text())
    generator = np.random.default_rng(int(ending))
    for _ in range(20):
        code, said = stop_at(call, generator.uniform(0.05, 1.05) * length, ending)
        no_fault(code, said)
        for path in out.iterdir():
            if MOSTLY_HIDDEN in path.name:
                continue
            if path.suffix == ".json":
                assert json.loads(path.read_text())["schema"] == first["schema"]
            else:
                with h5py.File(path) as dossier:
                    assert dossier.attrs["schema"]
        assert any(path.name.startswith("gains") for path in out.iterdir()), "the earlier sheet is lost"
    full_length(call)
    last = json.loads((out / "gains.json").read_text())
    assert (last["status"], last["controller"], last["selection"]) == (
        first["status"],
        first["controller"],
        first["selection"],
    )
    assert not [path for path in out.iterdir() if MOSTLY_HIDDEN in path.name]
