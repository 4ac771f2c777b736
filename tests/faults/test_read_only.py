"""Folders that can't be written to: refused in words before anything is computed, for the superuser too."""

from pathlib import Path

import pytest
from little_rig import can_mount, in_words, run, write_rig

pytestmark = pytest.mark.skipif(not can_mount(), reason="needs a mount namespace for a read-only disk")


@pytest.fixture
def logs(tmp_path: Path, untouched) -> list[Path]:
    """Two logs that must stay as they are."""
    written = write_rig(tmp_path / "logs")
    untouched(*written)
    return written


def read_only(folder: Path) -> str:
    """A line of shell that makes a folder a read-only disk with what was in it."""
    return f'mount --bind "{folder}" "{folder}" && mount -o remount,bind,ro "{folder}"'


@pytest.mark.parametrize("command", ["process", "draft", "batch", "watch"])
def test_a_read_only_folder_for_results_is_refused(command: str, logs: list[Path], tmp_path: Path) -> None:
    """The error names the folder and the option that takes another."""
    folder = logs[0].parent
    rig, out = folder / "rig.toml", folder / "out"
    calls = {
        "process": ("process", rig, "--out", out),
        "draft": ("draft", logs[0], "--out", folder / "drafted.toml"),
        "batch": ("batch", rig, "--out", out, "--workers", 1),
        "watch": ("watch", folder, "--rig", rig, "--out", out, "--once"),
    }
    ended = run(*calls[command], inside=read_only(folder))
    in_words(ended, 2, str(folder), "Read-only file system", "--out")
    assert sorted(path.name for path in folder.iterdir()) == ["fit.csv", "held_out.csv", "rig.toml"]


def test_a_read_only_folder_of_logs_is_enough_to_look_at_them(logs: list[Path]) -> None:
    """Reading takes no lock and writes nothing."""
    ended = run("inspect", *logs, "--rig", logs[0].parent / "rig.toml", inside=read_only(logs[0].parent))
    assert ended.returncode in (0, 3), ended.stderr
