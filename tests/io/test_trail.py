"""From any sheet back to the one that it replaces, by its hash."""

import hashlib
import json

import pytest
from gainwright.io import job
from gainwright.io.deliver import deliver


@pytest.fixture
def rig_file(made, tmp_path, monkeypatch):
    """A rig file whose job is the made one."""
    monkeypatch.setattr(job, "process_rig", lambda *arguments: made.outcome())
    file = tmp_path / "rig.toml"
    file.write_text("", "utf-8")
    return file


def test_a_sheet_names_the_one_that_it_replaces(rig_file, tmp_path) -> None:
    """The first replaces nothing; the second the first, by the hash of its bytes, when it was made and its status."""
    out = tmp_path / "out"
    deliver(rig_file, out, with_report=False)
    first = (out / "gains.json").read_bytes()
    assert "replaces" not in json.loads(first)["provenance"]
    deliver(rig_file, out, with_report=False)
    trail = json.loads((out / "gains.json").read_bytes())["provenance"]["replaces"]
    assert trail["sha256"] == hashlib.sha256(first).hexdigest()
    assert trail["created"] == json.loads(first)["provenance"]["created"]
    assert trail["status"] == "released"
    assert (out / trail["file"]).read_bytes() == first


def test_a_sheet_that_cannot_be_read_is_named_by_its_hash_alone(rig_file, tmp_path) -> None:
    """Somebody wrote over it: the bytes are still found."""
    out = tmp_path / "out"
    out.mkdir()
    (out / "gains.json").write_text("not a sheet", "utf-8")
    deliver(rig_file, out, with_report=False)
    trail = json.loads((out / "gains.json").read_bytes())["provenance"]["replaces"]
    assert trail == {"file": "gains.superseded.json", "sha256": hashlib.sha256(b"not a sheet").hexdigest()}
