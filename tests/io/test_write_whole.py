"""Results are whole or absent, whatever happens to the job."""

import os
import resource
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.write_whole import OutputFolder

NOBODY = 65534
HOLD = """
import sys, time
from pathlib import Path
from gainwright.io.write_whole import OutputFolder
with OutputFolder(Path(sys.argv[1])) as output:
    print("held", flush=True)
    time.sleep(float(sys.argv[2]))
    output.write({"gains.json": sys.argv[3].encode() * 100_000, "dossier.h5": sys.argv[3].encode()})
"""


def start_job(folder: Path, seconds: float, mark: str) -> subprocess.Popen[str]:
    """A second process that holds the folder for some seconds and then writes its mark."""
    call = [sys.executable, "-P", "-c", HOLD, str(folder), str(seconds), mark]
    return subprocess.Popen(call, stdout=subprocess.PIPE, text=True)


def wait_until_held(job: subprocess.Popen[str]) -> None:
    assert job.stdout is not None
    assert job.stdout.readline() == "held\n"


def test_what_is_written_is_all_that_is_left_in_the_folder(tmp_path: Path) -> None:
    """No lock and no temporary file stay behind."""
    with OutputFolder(tmp_path / "deep" / "out") as output:
        output.write({"gains.json": b"{}", "dossier.h5": b"x"})
    assert sorted(path.name for path in (tmp_path / "deep" / "out").iterdir()) == ["dossier.h5", "gains.json"]


def test_an_earlier_result_is_set_aside_even_when_the_job_fails(tmp_path: Path) -> None:
    """A failed job leaves the earlier sheet under its superseded name, and no current one."""
    (tmp_path / "gains.json").write_text("old sheet")
    (tmp_path / "report.html").write_text("old report")
    with pytest.raises(RequestError, match="the rig file is wrong"), OutputFolder(tmp_path):
        raise RequestError("the rig file is wrong")
    assert (tmp_path / "gains.superseded.json").read_text() == "old sheet"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["gains.superseded.json", "report.superseded.html"]


def test_a_folder_made_for_a_job_that_fails_is_removed_again(tmp_path: Path) -> None:
    """Nothing was there before, so nothing is there after."""
    with pytest.raises(ZeroDivisionError), OutputFolder(tmp_path / "out"):
        _ = 1 / 0
    assert not (tmp_path / "out").exists()


def test_a_path_below_a_file_is_refused_in_one_clear_error(tmp_path: Path) -> None:
    """The error names the folder and what to do; it is the caller's mistake, not a fault."""
    (tmp_path / "file").write_text("")
    with pytest.raises(RequestError, match="can't be written here") as caught, OutputFolder(tmp_path / "file" / "out"):
        pass
    assert str(tmp_path / "file" / "out") in caught.value.where
    assert "--out" in caught.value.advice


def test_a_read_only_folder_is_refused() -> None:
    """A folder without write permission is refused before anything is computed; the superuser steps down for it."""
    user = os.geteuid()
    folder = Path(tempfile.mkdtemp())
    folder.chmod(0o555)
    try:
        if user == 0:
            os.seteuid(NOBODY)
        with pytest.raises(RequestError, match="can't be written here"), OutputFolder(folder):
            pass
    finally:
        os.seteuid(user)
        folder.rmdir()


def test_running_out_of_room_leaves_the_folder_without_a_half_written_result(tmp_path: Path) -> None:
    """A size limit of the operating system stands for a full disk: the first file fits, the second does not."""
    earlier, ceiling = resource.getrlimit(resource.RLIMIT_FSIZE)
    handler = signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    try:
        with OutputFolder(tmp_path) as output:
            resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, ceiling))
            with pytest.raises(RequestError, match="can't be written here"):
                output.write({"dossier.h5": b"small", "gains.json": b"x" * 200_000})
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (earlier, ceiling))
        signal.signal(signal.SIGXFSZ, handler)
    assert list(tmp_path.iterdir()) == []


def test_two_jobs_in_one_folder_follow_each_other(tmp_path: Path) -> None:
    """Both end well, the result is one job's whole result, and the other's sheet is set aside whole."""
    jobs = [start_job(tmp_path, 0.2, mark) for mark in "ab"]
    for job in jobs:
        job.communicate(timeout=60)
    assert [job.returncode for job in jobs] == [0, 0]
    now = (tmp_path / "gains.json").read_text()
    before = (tmp_path / "gains.superseded.json").read_text()
    assert {now, before} == {"a" * 100_000, "b" * 100_000}
    assert (tmp_path / "dossier.h5").read_text() == now[0]


def test_a_held_folder_is_not_waited_on_for_ever(tmp_path: Path) -> None:
    """After its patience the second job names the process that holds the folder, and takes nothing away."""
    job = start_job(tmp_path, 30.0, "a")
    try:
        wait_until_held(job)
        begin = time.monotonic()
        with pytest.raises(RequestError, match="another job holds") as caught, OutputFolder(tmp_path, patience_s=0.2):
            pass
        assert time.monotonic() - begin < 10.0
        assert f'"pid": {job.pid}' in caught.value.found
    finally:
        job.kill()
        job.communicate()


def test_a_killed_job_blocks_nobody_and_its_remains_are_cleared(tmp_path: Path) -> None:
    """SIGKILL can't be caught: the lock must go with the process, and parts of files are swept by the next job."""
    job = start_job(tmp_path, 30.0, "a")
    wait_until_held(job)
    job.kill()
    job.communicate()
    (tmp_path / ".gains.json.gainwright-part").write_text("half")
    with OutputFolder(tmp_path, patience_s=5.0) as output:
        output.write({"gains.json": b"whole"})
    assert [path.name for path in tmp_path.iterdir()] == ["gains.json"]


def test_a_killed_job_never_leaves_half_a_sheet(tmp_path: Path) -> None:
    """Killed at many moments around its writing, the sheet is absent or whole."""
    seen = set()
    for delay in (0.0, 0.002, 0.005, 0.01, 0.02, 0.05):
        job = start_job(tmp_path, 0.0, "a")
        wait_until_held(job)
        time.sleep(delay)
        job.kill()
        job.communicate()
        sheet = tmp_path / "gains.json"
        seen.add(sheet.read_text() if sheet.exists() else "")
    assert seen <= {"", "a" * 100_000}
