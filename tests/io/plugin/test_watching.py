"""`gainwright watch`: each completed run once, with the rig file's tables or as a fresh held-out run."""

import os
import shutil
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import numpy as np
import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.commands.main import main
from gainwright.io.plugin.jobs import Done, Job, StoppedEarlyError, do
from gainwright.io.plugin.journal import Journal
from gainwright.io.plugin.stopped_early import refuse_stopped_early
from gainwright.io.plugin.watching import Watch, Watcher, watch
from gainwright.io.rigfile.load import load_rig
from stand_in import quick_work, whole

RIG = """
[rig]
name = "invented"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[[runs]]
file = "runs/step_*.csv"
use = "fit"
[controller]
update_interval = "50 ms"
structures = ["PI"]
[requirements]
test_step = "2 mm"
overshoot = { at_most = "15 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = { lowest = "0 mm", highest = "100 mm" }
"""


def log(path: Path, seed: int, *, until: float = 30.0, tail: str = "\n") -> None:
    """Up to 30 s at 20 Hz of a lag of 1 s with dead time 0.2 s and 2 mm/V, in closed form."""
    random = np.random.default_rng(seed)
    time = np.arange(0.0, until, 0.05)
    command, response = np.full(time.size, 3.0), np.full(time.size, 50.0)
    sizes = [2.0, -3.0, 2.5, -1.5] if seed % 2 else [-1.5, 2.5, -3.0, 2.0]
    for start, size in zip([2.0, 9.0, 16.0, 23.0], sizes, strict=True):
        command += size * (time >= start)
        response += 2.0 * size * (1.0 - np.exp(-np.clip(time - start - 0.2, 0.0, None)))
    response += random.normal(0.0, 0.03, time.size)
    rows = [f"{t:.3f},{u:.3f},{y:.5f}" for t, u, y in zip(time, command, response, strict=True)]
    path.write_text("t,u,y\n" + "\n".join(rows) + tail, "utf-8")


@pytest.fixture
def rig(tmp_path: Path) -> Path:
    """A rig file whose fit runs are to come into runs/."""
    (tmp_path / "runs").mkdir()
    (tmp_path / "rig.toml").write_text(RIG, "utf-8")
    return tmp_path / "rig.toml"


def asked(rig: Path, **changes: object) -> Watch:
    """A watch of runs/ that doesn't wait long."""
    return Watch(rig.parent / "runs", rig, rig.parent / "out", **{"quiet_s": 0.1, "every_s": 0.05, **changes})  # type: ignore[arg-type]


def watched(rig: Path, work=quick_work) -> tuple[dict[str, str], list[int]]:
    """Watch until all is done; status by label, and the codes."""
    ended: list[Done] = []
    codes = watch(asked(rig, once=True), lambda said: None, ended.append, threading.Event(), work)
    return {done.label: done.status for done in ended}, codes


def test_each_run_is_done_once_and_again_only_when_its_content_or_the_rig_file_changes(rig: Path) -> None:
    """A second watch does nothing; a run under a second name is the same run."""
    (rig.parent / "runs" / "a.csv").write_text("t,u,y\n1,2,3\n")
    (rig.parent / "runs" / "b.csv").write_text("t,u,y\n1,2,held\n")
    assert watched(rig) == ({"a.csv": "released", "b.csv": "held"}, [0, 3])
    assert watched(rig) == ({}, [0, 3])
    shutil.copy(rig.parent / "runs" / "a.csv", rig.parent / "runs" / "copy.csv")
    assert watched(rig)[0] == {}
    (rig.parent / "runs" / "b.csv").write_text("t,u,y\n1,2,4\n")
    assert watched(rig) == ({"b.csv": "released"}, [0, 0])
    rig.write_text(RIG + "# a remark\n", "utf-8")
    assert watched(rig) == ({"a.csv": "released", "b.csv": "released"}, [0, 0])


def test_what_a_killed_watch_had_done_is_not_done_again(rig: Path) -> None:
    """The results and their receipt are whole, the journal doesn't know of them."""
    (rig.parent / "runs" / "a.csv").write_text("t,u,y\n1,2,3\n")
    watched(rig)
    for file in rig.parent.glob("out/journal.*"):
        file.unlink()
    assert watched(rig) == ({}, [0])
    assert whole(rig.parent / "out" / "a.csv")


def test_runs_that_appear_while_watching_are_done_and_a_stop_ends_the_watch(rig: Path) -> None:
    """Copied under another name and renamed into place, one after the other."""
    stop, ended = threading.Event(), []

    def note(done: Done) -> None:
        ended.append(done.label)
        if len(ended) == 1:
            (rig.parent / "runs" / "second.csv").write_text("t,u,y\n4,5,6\n")
        else:
            stop.set()

    (rig.parent / "runs" / "first.csv").write_text("t,u,y\n1,2,3\n")
    assert watch(asked(rig), lambda said: None, note, stop, quick_work) == [0, 0]
    assert ended == ["first.csv", "second.csv"]


def test_a_folder_that_is_not_there_is_a_wrong_call(rig: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """So is a rig file with a wrong word; one whose runs are still to come is not."""
    assert main(["watch", str(rig.parent / "none"), "--rig", str(rig)]) == 2
    assert "no such folder" in capsys.readouterr().err
    rig.write_text(RIG.replace("overshoot", "overshot"), "utf-8")
    assert main(["watch", str(rig.parent / "runs"), "--rig", str(rig), "--once"]) == 2
    assert 'did you mean "overshoot"' in capsys.readouterr().err
    rig.write_text(RIG, "utf-8")
    assert main(["watch", str(rig.parent / "runs"), "--rig", str(rig), "--once", "--quiet", "0.1"]) == 0
    assert "waiting for" in capsys.readouterr().err


def job(rig: Path, name: str, **changes: object) -> Job:
    return Job("k" * 64, name, rig, rig.parent / "out" / name, rig.parent / "runs" / name, **changes)  # type: ignore[arg-type]


def test_a_run_that_no_table_names_is_held_out_and_releases_what_was_fitted(rig: Path) -> None:
    """The whole job, in this process: one fit run by its pattern, one fresh run beside it."""
    log(rig.parent / "runs" / "step_1.csv", 1)
    log(rig.parent / "runs" / "monday.csv", 2)
    done = do(job(rig, "step_1.csv", with_report=False))
    assert (done.status, done.code) == ("held", 3), done.said
    assert "no held-out run" in done.said
    done = do(job(rig, "monday.csv", with_report=False))
    assert (done.status, done.code, done.said) == ("released", 0, "")
    assert done.controller.startswith("PI, K = ")
    assert sorted(path.name for path in done.folder.iterdir()) == ["dossier.h5", "gains.json", "job.json"]
    assert do(job(rig, "monday.csv", with_report=False)) == done


def test_a_run_that_must_be_left_out_is_not_fitted(rig: Path) -> None:
    """The only fit run is still being written."""
    log(rig.parent / "runs" / "step_1.csv", 1)
    log(rig.parent / "runs" / "monday.csv", 2)
    done = do(job(rig, "monday.csv", left_out=(rig.parent / "runs" / "step_1.csv",)))
    assert done.code == 2
    assert "no run to fit is complete yet" in done.said


def test_a_bad_log_is_recorded_with_its_receipt_and_without_a_sheet(rig: Path) -> None:
    """Exit 4; asked again, the receipt answers."""
    (rig.parent / "runs" / "step_1.csv").write_text("no log at all\n")
    done = do(job(rig, "step_1.csv"))
    assert (done.status, done.code) == ("bad log", 4)
    assert [path.name for path in done.folder.iterdir()] == ["job.json"]
    assert do(job(rig, "step_1.csv")) == done


@pytest.mark.parametrize(
    ("until", "tail", "change", "mark"),
    [
        (23.2, "\n", "", "early end"),
        (30.0, "\n30.000,2", "", "last row of the log is cut"),
        (20.0, "\n", 'to = "30 s"', "it ends at 19.95 s"),
    ],
)
def test_a_run_that_was_stopped_early_is_not_tuned_from(
    rig: Path, until: float, tail: str, change: str, mark: str
) -> None:
    """A step with 0.2 s of response, a row cut in two, a window that the log doesn't fill."""
    log(rig.parent / "runs" / "step_1.csv", 1, until=until, tail=tail)
    rig.write_text(RIG.replace('use = "fit"', f'use = "fit"\n{change}'), "utf-8")
    with pytest.raises(StoppedEarlyError, match=mark):
        refuse_stopped_early(load_rig(rig).runs[0], load_rig(rig))
    done = do(job(rig, "step_1.csv"))
    assert (done.status, done.code) == ("stopped early", 4)
    assert [path.name for path in done.folder.iterdir()] == ["job.json"]


def test_a_whole_run_has_no_mark_of_a_stop(rig: Path) -> None:
    """With a line end and without one."""
    for tail in ("\n", ""):
        log(rig.parent / "runs" / "step_1.csv", 1, tail=tail)
        refuse_stopped_early(load_rig(rig).runs[0], load_rig(rig))


def test_a_run_that_was_stopped_early_is_not_fitted_by_later_jobs_either(rig: Path) -> None:
    """The journal knows it by its name until a whole run takes its place."""
    (rig.parent / "runs" / "a.csv").write_text("t,u,y\n1,2,3\n")
    with Journal(rig.parent / "out") as journal:
        journal.begin("x", "step_1.csv", rig.parent)
        journal.end("x", 4, "stopped early", "")
    with Journal(rig.parent / "out") as journal:
        job = next(Watcher(asked(rig), journal, lambda said: None, threading.Event()).jobs())
    assert job.left_out == (rig.parent / "runs" / "step_1.csv",)


# A shell that starts the tests in the background hands its children an ignored Control-C: the watcher takes it back.
SCRIPT = """
import signal, sys
signal.signal(signal.SIGINT, signal.default_int_handler)
sys.path.insert(0, {here!r})
import gainwright.io.plugin.watching as watching
from stand_in import quick_work
watching.watch.__kwdefaults__ = None
watching.watch.__defaults__ = (quick_work,)
from gainwright.io.commands.main import main
if __name__ == "__main__":
    sys.exit(main())
"""


@pytest.mark.skipif(os.name != "posix", reason="signals as on posix")
@pytest.mark.parametrize(("number", "code"), [(signal.SIGTERM, 3), (signal.SIGINT, 130)])
def test_a_watch_ends_by_its_signals(rig: Path, number: int, code: int) -> None:
    """SIGTERM: with the gravest code of its runs; Control-C: 130."""
    (rig.parent / "runs" / "a.csv").write_text("t,u,y\n1,2,held\n")
    script = rig.parent / "script.py"
    script.write_text(SCRIPT.format(here=str(Path(__file__).parent)))
    words = [sys.executable, "-P", str(script), "watch", str(rig.parent / "runs"), "--rig", str(rig), "--quiet", "0.1"]
    with subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True) as watcher:
        assert watcher.stdout is not None
        assert watcher.stdout.readline().startswith("a.csv: held")
        time.sleep(0.2)
        watcher.send_signal(number)
        try:
            watcher.communicate(timeout=30)
        finally:
            watcher.kill()
    assert watcher.returncode == code


def test_two_watches_of_one_folder_are_refused(rig: Path) -> None:
    """The second one would do everything twice."""
    with Journal(rig.parent / "out"), pytest.raises(RequestError, match="another program keeps the journal"):
        watched(rig)
