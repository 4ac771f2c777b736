"""A log that is deleted between its listing and its reading, or while it is read: an error that names it, exit 4."""

import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from gainwright.ident.errors import RecordError
from gainwright.io.commands.main import main
from gainwright.io.drafting.draft import draft_rig
from gainwright.io.inspection import inspect_log
from gainwright.io.plugin.folder import content_key
from gainwright.io.plugin.jobs import Done
from gainwright.io.plugin.watching import Watch, watch
from gainwright.io.read_record import read_record
from gainwright.io.readers import csv as csv_reader
from gainwright.io.readers.hdf5 import Hdf5Reader
from gainwright.io.readers.port import Hints
from gainwright.io.rigfile.load import load_rig
from little_rig import write_rig


def vanishing(module: Any, name: str, log: Path, monkeypatch: pytest.MonkeyPatch, *, after: bool) -> None:
    """Make a function of the program delete the log before or after its own work."""
    real: Callable[..., Any] = getattr(module, name)

    def stand_in(*arguments: Any, **more: Any) -> Any:
        if not after:
            log.unlink(missing_ok=True)
        result = real(*arguments, **more)
        log.unlink(missing_ok=True)
        return result

    monkeypatch.setattr(module, name, stand_in)


def test_a_log_deleted_after_the_rig_file_was_read_is_named(tmp_path: Path) -> None:
    """The listing of a pattern is old by the time its runs are read."""
    fit, _ = write_rig(tmp_path)
    rig = load_rig(tmp_path / "rig.toml")
    fit.unlink()
    with pytest.raises(RecordError) as caught:
        read_record(rig.runs[0], rig)
    assert str(fit) in caught.value.where
    assert "No such file" in caught.value.found


@pytest.mark.parametrize("after", [False, True])
def test_a_log_deleted_while_it_is_read_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, after: bool) -> None:
    """Gone before its rows are read, or before its bytes are hashed for the trail."""
    fit, _ = write_rig(tmp_path)
    rig = load_rig(tmp_path / "rig.toml")
    vanishing(csv_reader, "whole_rows", fit, monkeypatch, after=after)
    with pytest.raises(RecordError) as caught:
        read_record(rig.runs[0], rig)
    assert str(fit) in caught.value.where
    assert "No such file" in caught.value.found


@pytest.mark.parametrize("look", [inspect_log, lambda log: draft_rig(log, log.parent / "drafted.toml")])
def test_looking_at_a_log_that_goes_away_is_refused_in_words(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, look: Callable[[Path], Any]
) -> None:
    """inspect and draft read a log more than once."""
    fit, _ = write_rig(tmp_path)
    vanishing(csv_reader, "whole_rows", fit, monkeypatch, after=True)
    with pytest.raises(RecordError) as caught:
        look(fit)
    assert str(fit) in caught.value.where


def test_an_hdf5_log_that_goes_away_between_two_looks_is_named(tmp_path: Path) -> None:
    """The child process finds nothing to open."""
    log = tmp_path / "log.h5"
    with h5py.File(log, "w") as file:
        file["y"] = np.arange(20.0)
    assert len(Hdf5Reader().channels(log, Hints())) == 1
    log.unlink()
    with pytest.raises(RecordError) as caught:
        Hdf5Reader().read(log, ["y"], Hints())
    assert str(log) in caught.value.where


def test_the_exit_code_of_a_vanished_log_is_that_of_a_bad_log(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """4, with the file's name, for inspect and for the whole job."""
    fit, _ = write_rig(tmp_path)
    vanishing(csv_reader, "whole_rows", fit, monkeypatch, after=True)
    assert main(["inspect", str(fit)]) == 4
    write_rig(tmp_path)
    assert main(["process", str(tmp_path / "rig.toml"), "--no-report"]) == 4
    assert capsys.readouterr().err.count(f"{fit}: the log went away while it was read") == 2
    assert not (tmp_path / "out").exists()


def test_a_watch_goes_on_when_a_run_vanishes_before_its_job(tmp_path: Path) -> None:
    """Found complete, then deleted: a bad log in the journal, named, and no fault."""
    write_rig(tmp_path)
    fresh = tmp_path / "runs" / "fresh.csv"
    fresh.parent.mkdir()
    fresh.write_bytes((tmp_path / "held_out.csv").read_bytes())
    ended: list[Done] = []
    asked = Watch(fresh.parent, tmp_path / "rig.toml", tmp_path / "out", quiet_s=0.0, every_s=0.01, once=True)
    codes = watch(asked, lambda said: fresh.unlink(), ended.append, threading.Event())
    assert codes == [4]
    assert str(fresh) in ended[0].said
    assert content_key([fresh, tmp_path / "rig.toml"]) is None
