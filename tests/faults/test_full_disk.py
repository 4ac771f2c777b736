"""A disk with no room left: one error in words, nothing half-written, earlier results and raw logs as they were."""

import subprocess
import sys
from pathlib import Path

import pytest
from little_rig import can_mount, in_words, run, write_rig

pytestmark = pytest.mark.skipif(not can_mount(), reason="needs a mount namespace for a small disk")

WRITE = """
import sys
from pathlib import Path
from gainwright.ident.errors import RequestError
from gainwright.io.write_whole import OutputFolder
folder = Path(sys.argv[1])
(folder / "gains.json").write_text("earlier")
try:
    with OutputFolder(folder) as output:
        output.write({"dossier.h5": b"x" * 20_000, "gains.json": b"y" * 200_000})
except RequestError as error:
    print(error.found)
print(sorted((path.name, path.read_bytes()) for path in folder.iterdir()))
"""
JOURNAL = """
import sys
from pathlib import Path
from gainwright.ident.errors import RequestError
from gainwright.io.plugin.journal import Journal
folder = Path(sys.argv[1])
with Journal(folder) as journal:
    journal.begin("first", "first", folder)
    journal.end("first", 0, "released", "")
    number = 0
    try:
        for number in range(10_000):
            journal.begin(f"{number}", "x" * 2000, folder)
            journal.end(f"{number}", 0, "released", "")
    except RequestError as error:
        print(error.what, "|", error.found, "|", number)
for large in folder.glob("filler"):
    large.unlink()
with Journal(folder) as journal:
    entries = journal.entries()
    print(len(entries), all(entry.code == 0 for entry in entries[:number]))
"""


def on_small_disk(program: str, folder: Path, size: str) -> list[str]:
    """Run Python code in a namespace where the folder is a disk of that size."""
    mount = f'mount -t tmpfs -o size={size} tmpfs "{folder}"; head -c 8192 /dev/zero > "{folder}/filler"; exec "$@"'
    call = ["unshare", "--mount", "--map-root-user", "sh", "-c", mount, "sh", sys.executable, "-P", "-c", program]
    ended = subprocess.run([*call, str(folder)], capture_output=True, text=True, timeout=100, check=False)
    assert ended.returncode == 0, ended.stderr
    return ended.stdout.splitlines()


def test_results_that_do_not_fit_are_not_there_at_all(tmp_path: Path) -> None:
    """The dossier would fit and the sheet doesn't: neither is there, and the earlier sheet stands aside whole."""
    said, left = on_small_disk(WRITE, tmp_path, "100k")
    assert said == "No space left on device"
    assert left == str([("filler", b"\0" * 8192), ("gains.superseded.json", b"earlier")])


def test_a_journal_that_does_not_fit_keeps_what_was_done(tmp_path: Path) -> None:
    """The error names the journal, and every job that had ended is still known after room was made."""
    said, left = on_small_disk(JOURNAL, tmp_path, "300k")
    what, found, number = said.split(" | ")
    assert what == "the journal can't be kept here"
    assert "full" in found
    entries, kept = left.split()
    assert int(entries) >= int(number) > 5
    assert kept == "True"


def test_a_draft_that_does_not_fit_is_not_there_at_all(tmp_path: Path, untouched) -> None:
    """Nothing of it stays, so that the next try isn't refused."""
    log, *_ = write_rig(tmp_path / "logs")
    untouched(log)
    disk = tmp_path / "disk"
    disk.mkdir()
    ended = run("draft", log, "--out", disk / "rig.toml", inside=_full(disk))
    in_words(ended, 2, "can't be written here", "No space left")
    listed = run("draft", log, "--out", disk / "rig.toml", inside=_full(disk) + f'; "$@"; ls -A "{disk}"; exit 0')
    assert listed.stdout.split() == ["filler"]


@pytest.mark.faults
def test_a_job_into_a_full_disk_ends_in_words(tmp_path: Path, untouched) -> None:
    """The whole job, and nothing of it is left."""
    logs = write_rig(tmp_path / "logs")
    untouched(*logs)
    disk = tmp_path / "disk"
    disk.mkdir()
    inside = _full(disk) + f'; "$@"; echo "ended $?"; ls -A "{disk}"; exit 0'
    ended = run("process", logs[0].parent / "rig.toml", "--no-report", "--out", disk / "out", inside=inside)
    assert ended.stdout.split() == ["ended", "2", "filler"], ended.stderr
    assert "can't be written here" in ended.stderr


def test_a_full_disk_for_the_output_itself_is_no_fault_of_the_program(tmp_path: Path, untouched) -> None:
    """What inspect prints goes to a file on a full disk."""
    log, *_ = write_rig(tmp_path)
    untouched(log)
    ended = run("inspect", log, inside='exec "$@" > /dev/full')
    in_words(ended, 2, "can't be written", "No space left")


def test_a_reader_that_goes_away_is_no_fault_of_the_program(tmp_path: Path) -> None:
    """`gainwright inspect log | true`."""
    log, *_ = write_rig(tmp_path)
    ended = run("inspect", log, inside='{ "$@"; echo "ended $?" >&2; } | true; exit 0')
    assert "ended 130" in ended.stderr or "ended 0" in ended.stderr
    assert "fault" not in ended.stderr


def _full(disk: Path) -> str:
    """Mount a disk of 16 kB there and fill it to the last byte."""
    return f'mount -t tmpfs -o size=16k tmpfs "{disk}"; head -c 100000 /dev/zero > "{disk}/filler" 2>/dev/null'
