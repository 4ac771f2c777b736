"""What one command opens, writes, starts and connects to, told by the interpreter itself (audit events, PEP 578)."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from little_rig import can_mount, run, write_rig

WATCHED = """
import json, os, sys
seen = []
def hear(event, given):
    if event == "open" and isinstance(given[0], (str, bytes)):
        writes = isinstance(given[2], int) and given[2] & (os.O_WRONLY | os.O_RDWR | os.O_CREAT)
        seen.append(["write" if writes else "read", os.path.abspath(os.fsdecode(given[0]))])
    elif event in {"os." + each for each in "remove rename mkdir rmdir link symlink truncate chmod chown".split()}:
        seen.extend(["write", os.path.abspath(os.fsdecode(each))] for each in given if isinstance(each, (str, bytes)))
    elif event.startswith(("socket.connect", "socket.bind", "socket.getaddrinfo", "socket.sendto", "urllib", "http")):
        seen.append(["network", f"{event} {given[1:]}"])
    elif event == "subprocess.Popen":
        seen.append(["start", os.fsdecode(given[0])])
    elif event in ("os.system", "os.exec", "os.posix_spawn", "pty.spawn"):
        seen.append(["shell", event])
sys.addaudithook(hear)
from gainwright.io.commands.main import main
code = main(sys.argv[2:])
said = json.dumps({"code": code, "seen": seen})
with open(sys.argv[1], "w") as told:
    told.write(said)
"""


def watched(folder: Path, *arguments: object) -> tuple[int, dict[str, set[str]]]:
    """Run a command with home and temporary files in a folder of its own; exit code, and what was seen of each kind."""
    told, home = folder / "told.json", folder / "home"
    home.mkdir(exist_ok=True)
    call = [sys.executable, "-P", "-c", WATCHED, str(told), *map(str, arguments)]
    environment = {"PATH": "/usr/bin:/bin", "HOME": str(home), "TMPDIR": str(home), "LANG": "C.UTF-8"}
    environment |= {name: value for name, value in os.environ.items() if name == "PYTHONPATH"}
    ended = subprocess.run(call, capture_output=True, text=True, timeout=250, check=False, env=environment)
    assert told.exists(), ended.stderr
    said = json.loads(told.read_text())
    seen: dict[str, set[str]] = {"read": set(), "write": set(), "network": set(), "start": set(), "shell": set()}
    for kind, what in said["seen"]:
        seen[kind].add(what)
    return said["code"], seen


def outside(paths: set[str], *allowed: Path) -> list[str]:
    """Those below none of these folders; the interpreter's compiled modules aside."""
    tops = tuple(str(folder.resolve()) for folder in allowed)
    return sorted(
        path for path in paths if not path.startswith(tops) and "__pycache__" not in path and path != "/dev/null"
    )


def logs_read(seen: dict[str, set[str]], top: Path) -> set[str]:
    """Files below a folder that were read, by their names."""
    return {Path(path).name for path in seen["read"] if path.startswith(f"{top}/") and Path(path).is_file()}


@pytest.mark.parametrize("command", ["inspect", "draft"])
def test_looking_at_a_log_reads_that_log_only(tmp_path: Path, untouched, command: str) -> None:
    """Its neighbours are not opened, nothing else is written, nothing is connected to."""
    logs = write_rig(tmp_path / "rig")
    untouched(*logs)
    drafted = tmp_path / "out" / "drafted.toml"
    drafted.parent.mkdir()
    more = ("--out", drafted) if command == "draft" else ()
    code, seen = watched(tmp_path, command, logs[0], *more)
    assert code in (0, 3)
    assert logs_read(seen, tmp_path / "rig") == {"fit.csv"}
    assert outside(seen["write"], drafted.parent, tmp_path / "home") == []
    assert seen["network"] == seen["shell"] == seen["start"] == set()


def test_a_job_touches_its_logs_and_its_folder_only(tmp_path: Path, untouched) -> None:
    """It reads what the rig file names, writes into its folder, starts this Python at most, and connects to nothing."""
    logs = write_rig(tmp_path / "rig")
    (tmp_path / "rig" / "neighbour.csv").write_bytes(logs[0].read_bytes())
    untouched(*logs)
    code, seen = watched(tmp_path, "process", tmp_path / "rig" / "rig.toml", "--no-report", "--out", tmp_path / "out")
    assert code in (0, 3)
    assert logs_read(seen, tmp_path / "rig") == {"fit.csv", "held_out.csv", "rig.toml"}
    assert outside(seen["write"], tmp_path / "out", tmp_path / "home") == []
    assert seen["network"] == seen["shell"] == set()
    assert seen["start"] <= {sys.executable, "uname"}  # the latter by `platform` of the standard library


def test_the_watch_over_the_interpreter_sees_what_it_must(tmp_path: Path) -> None:
    """A file written beside, a connection tried, a program started."""
    script = WATCHED.split("from gainwright")[0] + (
        "import socket, subprocess, json\n"
        "open(sys.argv[1] + '.x', 'w').close()\n"
        "s = socket.socket(); s.settimeout(0.1)\n"
        "try:\n    s.connect(('127.0.0.1', 9))\nexcept OSError:\n    pass\n"
        "s.close(); subprocess.run(['true'])\n"
        "print(json.dumps(sorted({kind for kind, _ in seen})))\n"
    )
    call = [sys.executable, "-P", "-c", script, str(tmp_path / "told")]
    ended = subprocess.run(call, capture_output=True, text=True, timeout=60, check=True)
    assert {"network", "start", "write"} <= set(json.loads(ended.stdout))


@pytest.mark.faults
@pytest.mark.skipif(not can_mount(), reason="needs a namespace without a network")
def test_a_job_needs_no_network(tmp_path: Path, untouched) -> None:
    """The whole job with its report where there is no network at all."""
    logs = write_rig(tmp_path)
    untouched(*logs)
    ended = run("process", tmp_path / "rig.toml", inside='exec unshare --net "$@"', seconds=280.0)
    assert ended.returncode in (0, 3), ended.stderr
    assert (tmp_path / "out" / "report.html").exists()
