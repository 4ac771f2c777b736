"""Two programs at one time with one output folder or one file: one after the other, or one is refused in words."""

import subprocess
from pathlib import Path

import pytest
from gainwright.io.plugin.journal import Journal
from gainwright.io.rigfile.load import load_rig
from little_rig import PROGRAM, in_words, run, write_rig


def test_of_two_drafts_at_once_one_wins_whole(tmp_path: Path, untouched) -> None:
    """Neither overwrites the other's; the loser is told."""
    log, *_ = write_rig(tmp_path / "logs")
    untouched(log)
    out = tmp_path / "rig.toml"
    call = [*PROGRAM, "draft", str(log), "--out", str(out)]
    both = [subprocess.Popen(call, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True) for _ in range(2)]
    said = [each.communicate(timeout=100)[1] for each in both]
    assert sorted(each.returncode for each in both) == [0, 2]
    assert any("never overwrites" in each for each in said)
    assert [path.name for path in tmp_path.iterdir() if path.is_file()] == ["rig.toml"]
    assert "guessed = true" in out.read_text()


@pytest.mark.parametrize("command", ["batch", "watch"])
def test_a_second_keeper_of_one_journal_is_refused(tmp_path: Path, untouched, command: str) -> None:
    """At once, and with the option that takes another folder."""
    logs = write_rig(tmp_path)
    untouched(*logs)
    rig, out = tmp_path / "rig.toml", tmp_path / "out"
    calls = {
        "batch": ("batch", rig, "--out", out, "--workers", 1),
        "watch": ("watch", tmp_path, "--rig", rig, "--out", out, "--once"),
    }
    with Journal(out):
        in_words(run(*calls[command]), 2, str(out), "another program keeps the journal", "--out")


@pytest.mark.faults
def test_two_jobs_in_one_folder_both_end_well(tmp_path: Path, untouched) -> None:
    """The second waits for the first; each sheet is whole, the earlier one set aside."""
    logs = write_rig(tmp_path)
    untouched(*logs)
    call = [*PROGRAM, "process", str(tmp_path / "rig.toml"), "--no-report"]
    both = [subprocess.Popen(call, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True) for _ in range(2)]
    said = [each.communicate(timeout=280)[1] for each in both]
    assert {each.returncode for each in both} <= {0, 3}, said
    left = sorted(path.name for path in (tmp_path / "out").iterdir())
    assert left == ["dossier.h5", "dossier.superseded.h5", "gains.json", "gains.superseded.json"]
    assert load_rig(tmp_path / "rig.toml").name == "invented"
