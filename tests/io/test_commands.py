"""The command line: quick to answer, and each way of ending has its exit code."""

import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from gainwright.ident.errors import GainwrightError, RecordError, RequestError
from gainwright.io import deliver as delivery
from gainwright.io.commands.main import main

HEAVY = ("numpy", "scipy", "pandas", "lmfit", "h5py", "matplotlib", "pydantic", "pint", "rich", "jinja2")
# A stand-in for the job: the command line is under test here, and not what it calls.
# A shell that starts the tests in the background hands its children an ignored Control-C: the job takes it back.
STAND_IN = """
import signal, sys, time
import types
signal.signal(signal.SIGINT, signal.default_int_handler)
from gainwright.io.commands.main import main
def process_rig(rig, progress, change, aside):
    progress("pretending")
    {body}
job = types.ModuleType("gainwright.io.job")
job.process_rig = process_rig
sys.modules["gainwright.io.job"] = job
sys.exit(main())
"""


def run(*arguments: str, script: str = "import sys; from gainwright.io.commands.main import main; sys.exit(main())"):
    """The command in a process of its own, as the console script runs it."""
    return subprocess.run(
        [sys.executable, "-P", "-c", script, *arguments], capture_output=True, text=True, timeout=60, check=False
    )


@pytest.fixture
def rig_file(tmp_path: Path) -> Path:
    """A rig file that exists; its content is not looked at where the job is a stand-in."""
    path = tmp_path / "rig.toml"
    path.write_text('[rig]\nname = "made"\n')
    return path


def test_help_answers_in_under_0_3_s() -> None:
    """The quickest of five calls, Python's own start included: other load on the machine only ever slows it."""
    best = float("inf")
    for _ in range(5):
        begin = time.perf_counter()
        assert run("--help").returncode == 0
        best = min(best, time.perf_counter() - begin)
    assert best < 0.3


def test_help_loads_nothing_heavy() -> None:
    """What a machine without load hides from the clock is seen in the modules."""
    script = (
        "import sys; from gainwright.io.commands.main import main; main(['--help']); "
        f"print([name for name in {HEAVY!r} if name in sys.modules])"
    )
    assert run(script=script).stdout.splitlines()[-1] == "[]"


def test_help_names_every_command() -> None:
    """Seven promised names, none of them an empty promise."""
    shown = run("--help").stdout
    for name in ("process", "inspect", "retune", "recheck", "draft", "watch", "batch"):
        assert f"\n  {name} " in shown
    assert "(not yet)" not in shown


@pytest.mark.parametrize("arguments", [["proces", "x"], ["process"], ["process", "a", "--bad"], ["--bad"], ["inspect"]])
def test_a_wrong_call_ends_with_2(arguments: list[str], capsys) -> None:
    """The usage is shown on the error stream."""
    assert main(arguments) == 2
    assert "Usage: gainwright" in capsys.readouterr().err


def test_a_rig_file_that_does_not_exist_ends_with_2_and_makes_no_folder(tmp_path: Path, capsys) -> None:
    """Nothing is left behind for a mistyped name."""
    assert main(["process", str(tmp_path / "typo.toml")]) == 2
    assert "no such rig file" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("error", "code"),
    [(RequestError("wrong key"), 2), (RecordError("no samples"), 4), (GainwrightError("bad plug-in"), 1)],
)
def test_each_kind_of_error_has_its_exit_code(error, code: int, rig_file: Path, monkeypatch, capsys) -> None:
    """The message is on the error stream, whole, and without a traceback."""

    def fail(*_: object, **__: object) -> None:
        raise error

    monkeypatch.setattr(delivery, "deliver", fail)
    assert main(["process", str(rig_file)]) == code
    told = capsys.readouterr()
    assert error.what in told.err
    assert "Traceback" not in told.err
    assert told.out == ""


def test_a_fault_of_the_program_is_one_line_and_1(rig_file: Path) -> None:
    """The line says how to get the traceback."""
    ended = run("process", str(rig_file), script=STAND_IN.format(body="1 / 0"))
    assert ended.returncode == 1
    assert "a fault of the program itself: ZeroDivisionError" in ended.stderr
    assert "-v" in ended.stderr
    assert "Traceback" not in ended.stderr


def test_a_fault_of_the_program_shows_its_traceback_with_v(rig_file: Path) -> None:
    """For the person who mends it."""
    ended = run("-v", "process", str(rig_file), script=STAND_IN.format(body="1 / 0"))
    assert ended.returncode == 1
    assert "Traceback" in ended.stderr


def test_an_interrupted_job_ends_with_130_and_leaves_no_current_sheet(rig_file: Path) -> None:
    """Control-C in the middle of a job: the earlier sheet is set aside, the lock is gone."""
    out = rig_file.parent / "out"
    out.mkdir()
    (out / "gains.json").write_text("earlier")
    script = STAND_IN.format(body="time.sleep(30)")
    job = subprocess.Popen(
        [sys.executable, "-P", "-c", script, "process", str(rig_file)], stderr=subprocess.PIPE, text=True
    )
    assert job.stderr is not None
    assert "loading" in job.stderr.readline()
    assert "pretending" in job.stderr.readline()
    job.send_signal(signal.SIGINT)
    told = job.communicate(timeout=30)[1]
    assert job.returncode == 130
    assert "interrupted" in told
    assert [path.name for path in out.iterdir()] == ["gains.superseded.json"]


def test_a_job_that_fails_leaves_no_current_sheet(rig_file: Path) -> None:
    """Exit 4: the earlier sheet is set aside and nothing takes its place."""
    out = rig_file.parent / "elsewhere"
    out.mkdir()
    (out / "gains.json").write_text("earlier")
    body = "from gainwright.ident.errors import RecordError; raise RecordError('the response is dead')"
    ended = run("process", str(rig_file), "--out", str(out), script=STAND_IN.format(body=body))
    assert ended.returncode == 4
    assert "the response is dead" in ended.stderr
    assert [path.name for path in out.iterdir()] == ["gains.superseded.json"]


def test_a_job_computes_with_one_thread(rig_file: Path) -> None:
    """Small matrices, and several jobs on one machine: the libraries are told before they are loaded."""
    unset = "import os\nos.environ.pop('OPENBLAS_NUM_THREADS', None)\n"
    body = "import os; print(os.environ['OPENBLAS_NUM_THREADS'], file=sys.stderr); sys.exit(0)"
    ended = run("process", str(rig_file), script=unset + STAND_IN.format(body=body))
    assert ended.stderr.splitlines()[-1] == "1"


def test_progress_is_plain_lines_where_the_error_stream_is_no_terminal(rig_file: Path) -> None:
    """One line a stage, with the seconds since the start, and no control characters."""
    body = "progress('fitting', 0.1); progress('fitting', 0.5); progress('closing'); sys.exit(0)"
    shown = run("process", str(rig_file), script=STAND_IN.format(body=body)).stderr.splitlines()
    assert [line.split("] ")[1] for line in shown] == ["loading the libraries", "pretending", "fitting", "closing"]
    assert all(line.isprintable() for line in shown)
