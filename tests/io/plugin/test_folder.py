"""Which runs of a folder are complete: by looking twice and more, never by a lock and never by the clock of a share."""

import os
from pathlib import Path

import h5py
import pytest
from gainwright.io.plugin.folder import Folder, content_key
from gainwright.io.plugin.stopped_early import cut_in_a_row

ROWS = "t,u,y\n" + "".join(f"{k / 10},1,2\n" for k in range(50))


class Clock:
    """A clock that goes when told."""

    now = 100.0

    def __call__(self) -> float:
        return self.now


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def folder(tmp_path: Path, clock: Clock) -> Folder:
    """A watched folder with a quiet time of 5 s."""
    return Folder(tmp_path, quiet_s=5.0, clock=clock)


def names(found: tuple[list[Path], list[Path]]) -> tuple[list[str], list[str]]:
    """Of complete and of unfinished runs."""
    return [path.name for path in found[0]], [path.name for path in found[1]]


def test_a_file_is_complete_after_the_quiet_time(folder: Folder, tmp_path: Path, clock: Clock) -> None:
    """Not at first sight, however old its time of change says it is: the other machine's clock may be off."""
    (tmp_path / "run.csv").write_text(ROWS)
    os.utime(tmp_path / "run.csv", (1.0, 1.0))
    assert names(folder.look()) == ([], ["run.csv"])
    clock.now += 4.9
    assert names(folder.look()) == ([], ["run.csv"])
    clock.now += 0.2
    assert names(folder.look()) == (["run.csv"], [])


def test_a_file_that_grows_is_not_complete(folder: Folder, tmp_path: Path, clock: Clock) -> None:
    """Each change starts the quiet time again."""
    run = tmp_path / "run.csv"
    run.write_text(ROWS)
    folder.look()
    for _ in range(3):
        clock.now += 4.0
        with run.open("a") as log:
            log.write("9,1,2\n")
        assert names(folder.look()) == ([], ["run.csv"])
    clock.now += 5.1
    assert names(folder.look()) == (["run.csv"], [])


def test_a_log_that_ends_inside_a_row_is_waited_for_and_then_taken(
    folder: Folder, tmp_path: Path, clock: Clock
) -> None:
    """A buffered writer may pause; ten quiet times later its logger must have died."""
    (tmp_path / "run.csv").write_text(ROWS + "5.0,1")
    folder.look()
    clock.now += 20.0
    assert names(folder.look()) == ([], ["run.csv"])
    clock.now += 31.0
    assert names(folder.look()) == (["run.csv"], [])


def test_an_empty_file_is_waited_for_and_then_taken(folder: Folder, tmp_path: Path, clock: Clock) -> None:
    """A logger may open its file long before the first sample."""
    (tmp_path / "run.csv").touch()
    folder.look()
    clock.now += 20.0
    assert names(folder.look()) == ([], ["run.csv"])
    clock.now += 31.0
    assert names(folder.look()) == (["run.csv"], [])


def test_a_live_hdf5_file_is_not_complete_and_its_writer_keeps_it(folder: Folder, tmp_path: Path, clock: Clock) -> None:
    """Open for writing in another handle: quiet, but it does not open as finished; the writer goes on unhurt."""
    path = tmp_path / "run.h5"
    with h5py.File(path, "w", libver="latest") as log:
        values = log.create_dataset("y", data=[1.0, 2.0], maxshape=(None,), chunks=(64,))
        log.flush()
        folder.look()
        clock.now += 6.0
        assert names(folder.look()) == ([], ["run.h5"])
        values.resize((3,))
        values[2] = 3.0
    folder.look()
    clock.now += 6.0
    assert names(folder.look()) == (["run.h5"], [])
    with h5py.File(path, "r") as log:
        assert log["y"][:].tolist() == [1.0, 2.0, 3.0]


def test_unfinished_names_hidden_files_and_results_are_no_runs(tmp_path: Path, clock: Clock) -> None:
    """A log is copied under another name and renamed into place; results may stand inside the watched folder."""
    (tmp_path / "out").mkdir()
    for name in ("run.csv.part", ".run.csv", "~run.csv", "run.csv.tmp", "notes.md", "out/old.csv", "rig.toml"):
        (tmp_path / name).write_text(ROWS)
    folder = Folder(tmp_path, but=(tmp_path / "out",), clock=clock)
    assert folder.look() == ([], [])
    (tmp_path / "run.csv.part").rename(tmp_path / "run.csv")
    assert names(folder.look()) == ([], ["run.csv"])


def test_runs_in_sub_folders_and_runs_of_a_pattern_are_found(tmp_path: Path, clock: Clock) -> None:
    """Every scan goes through the whole tree."""
    (tmp_path / "day 1").mkdir()
    (tmp_path / "day 1" / "run_1.csv").write_text(ROWS)
    (tmp_path / "notes.csv").write_text(ROWS)
    assert names(Folder(tmp_path, pattern="run_*", clock=clock).look()) == ([], ["run_1.csv"])


def test_the_key_is_of_the_content_and_of_nothing_else(tmp_path: Path) -> None:
    """Another name, another time: the same key; another byte or another version: another key."""
    one, two = tmp_path / "a.csv", tmp_path / "b.csv"
    one.write_text(ROWS)
    two.write_text(ROWS)
    key = content_key([one], "1.0")
    assert key is not None
    assert key == content_key([two], "1.0")
    assert key != content_key([two], "1.1")
    two.write_text(ROWS + " ")
    assert key != content_key([two], "1.0")
    assert content_key([tmp_path / "gone.csv"]) is None


def test_a_last_row_with_fewer_fields_is_cut_and_a_missing_line_end_alone_is_not(tmp_path: Path) -> None:
    """Some loggers never write the last line end."""
    log = tmp_path / "run.csv"
    for tail, cut in (("", False), ("5.0,1,2", False), ("5.0,1", True), ("5.0", True)):
        log.write_text(ROWS + tail)
        assert cut_in_a_row(log) is cut
