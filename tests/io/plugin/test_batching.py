"""`gainwright batch`: many rig files, resumable, one bad job never stops the rest, on processes and on a cluster."""

import json
import subprocess
import sys
from pathlib import Path

import pytest
from gainwright.ident.errors import RequestError
from gainwright.io.commands.main import main
from gainwright.io.plugin.batching import batch, cluster, key_of, processes, result_folders
from gainwright.io.plugin.jobs import Done
from gainwright.io.report.overview import overview_html
from stand_in import quick_work, whole
from test_watching import RIG, log


def rig_files(folder: Path, texts: list[str]) -> list[Path]:
    """One rig file a text, each in a folder of its own."""
    files = []
    for number, text in enumerate(texts):
        place = folder / f"rig {number}"
        place.mkdir()
        (place / "rig.toml").write_text(text, "utf-8")
        files.append(place / "rig.toml")
    return files


def batched(files: list[Path], out: Path) -> tuple[tuple[Done, ...], list[str]]:
    """All results, and the labels of those that ended in this call, in their order."""
    told: list[str] = []

    def ended(done: Done, count: int, asked: int) -> None:
        assert asked == len(files)
        told.append(f"{count}: {done.status}")

    return batch(files, out, processes(2), ended, work=quick_work), told


def test_every_job_is_done_in_the_order_given_and_summed_up(tmp_path: Path) -> None:
    """Results beside each rig file, a summary for programs, a page for people."""
    files = rig_files(tmp_path, ["fine", "held", "fault", "fine"])
    ended, told = batched(files, tmp_path / "batch")
    assert [done.code for done in ended] == [0, 3, 1, 0]
    assert len(told) == 4
    assert [whole(file.parent / "out") for file in (files[0], files[1], files[3])] == [True] * 3
    summary = json.loads((tmp_path / "batch" / "batch.json").read_text("utf-8"))
    assert summary["asked"] == 4
    assert [each["status"] for each in summary["jobs"]] == ["released", "held", "fault", "released"]
    page = (tmp_path / "batch" / "overview.html").read_text("utf-8")
    assert "2 of 4 released" in page
    assert 'href="../rig%200/out/report.html"' in page


def test_a_batch_goes_on_where_it_was(tmp_path: Path) -> None:
    """What was done is not done again; faults are, and a changed log or rig file makes another job."""
    files = rig_files(tmp_path, ["fine", "fault", RIG.replace("runs/step_*.csv", "a.csv")])
    (files[2].parent / "a.csv").write_text("t,u,y\n1,2,3\n")
    batched(files, tmp_path / "batch")
    before = {file: (file.parent / "out" / "job.json").stat().st_mtime_ns for file in (files[0], files[2])}
    ended, _ = batched(files, tmp_path / "batch")
    assert [done.code for done in ended] == [0, 1, 0]
    assert {file: (file.parent / "out" / "job.json").stat().st_mtime_ns for file in before} == before
    (files[2].parent / "a.csv").write_text("t,u,y\n1,2,4\n")
    batched(files, tmp_path / "batch")
    assert (files[2].parent / "out" / "job.json").stat().st_mtime_ns != before[files[2]]
    assert (files[0].parent / "out" / "job.json").stat().st_mtime_ns == before[files[0]]


def test_rig_files_side_by_side_get_folders_of_their_own(tmp_path: Path) -> None:
    """One named twice is one job; two of one stem keep their whole names."""
    names = ["a.toml", "a.txt", "b.toml", "b.toml"]
    folders = result_folders([tmp_path / name for name in names])
    assert [folder.relative_to(tmp_path).as_posix() for folder in folders.values()] == [
        "out/a.toml", "out/a.txt", "out/b"
    ]  # fmt: skip


def test_the_key_of_a_job_is_that_of_its_rig_file_and_logs(tmp_path: Path) -> None:
    """A rig file that can't be loaded has a key too: its job says what is wrong."""
    (tmp_path / "runs").mkdir()
    log(tmp_path / "runs" / "step_1.csv", 1)
    (tmp_path / "rig.toml").write_text(RIG, "utf-8")
    first = key_of(tmp_path / "rig.toml")
    log(tmp_path / "runs" / "step_1.csv", 3)
    assert key_of(tmp_path / "rig.toml") not in (first, None)
    (tmp_path / "rig.toml").write_text("no rig file", "utf-8")
    assert key_of(tmp_path / "rig.toml") is not None
    assert key_of(tmp_path / "none.toml") is None


def test_the_command_prints_a_table_and_ends_with_the_gravest_code(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The real work, in processes of its own: a mistyped name (2), a rig file with a wrong word (2), a dead log (4)."""
    monkeypatch.chdir(tmp_path)
    wrong, dead = rig_files(tmp_path, [RIG.replace("overshoot", "overshot"), RIG.replace("runs/step_*", "step_*")])
    (dead.parent / "step_1.csv").write_text("no log at all\n")
    assert main(["batch", str(dead), "--workers", "1"]) == 4
    assert main(["batch", str(wrong), str(dead), str(tmp_path / "typo.toml"), "--workers", "1"]) == 2
    shown = capsys.readouterr().out
    assert "bad log       " in shown
    assert "1 bad log, 2 wrong call" in shown
    assert not (tmp_path / "out").exists()
    assert (tmp_path / "batch" / "overview.html").exists()


def test_names_and_reasons_are_escaped_on_the_page(tmp_path: Path) -> None:
    """A log may be called anything."""
    done = Done("k", "<b>rig</b>.toml", tmp_path / "out", 3, "held", "<script>alert(1)</script>")
    page = overview_html([done], 2, tmp_path)
    assert "<script>" not in page
    assert "<b>" not in page
    assert "1 jobs had not ended" in page


def test_a_cluster_that_does_not_answer_is_a_wrong_call(tmp_path: Path) -> None:
    """Whether distributed is installed or not."""
    with pytest.raises(RequestError, match=r"no scheduler answers|needs the package"), cluster("nonsense://nowhere"):
        pass


CLUSTER = """
import sys
sys.path.insert(0, {here!r})
from pathlib import Path
from distributed import LocalCluster
from gainwright.io.plugin.batching import batch, cluster
from stand_in import quick_work
if __name__ == "__main__":
    with LocalCluster(n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None) as local:
        files = [Path(name) for name in sys.argv[2:]]
        done = batch(files, Path(sys.argv[1]), cluster(local.scheduler_address), lambda *said: None, work=quick_work)
        print([each.code for each in done])
"""


def test_the_same_jobs_run_on_a_real_local_cluster(tmp_path: Path) -> None:
    """Two workers of dask.distributed in processes of their own; one of the jobs raises."""
    pytest.importorskip("distributed", reason="the extra 'cluster' is not installed")
    files = rig_files(tmp_path, ["fine", "held", "fault", *["fine"] * 5])
    script = tmp_path / "cluster.py"
    script.write_text(CLUSTER.format(here=str(Path(__file__).parent)))
    words = [sys.executable, "-P", str(script), str(tmp_path / "batch"), *map(str, files)]
    shown = subprocess.run(words, capture_output=True, text=True, timeout=120, check=False)
    assert shown.returncode == 0, shown.stderr
    assert shown.stdout.strip() == "[0, 3, 1, 0, 0, 0, 0, 0]"
    assert all(whole(file.parent / "out") for file in files if file != files[2])
