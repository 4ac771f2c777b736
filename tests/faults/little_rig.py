"""A little rig for the tests of faults: its logs in closed form, its rig file, and the program as a process."""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np

# A shell that starts the tests in the background hands its children an ignored Control-C: the program takes it back.
CALL = """
import signal, sys
signal.signal(signal.SIGINT, signal.default_int_handler)
from gainwright.io.commands.main import main
sys.exit(main())
"""
PROGRAM = [sys.executable, "-P", "-c", CALL]
RIG = """
[rig]
name = "invented"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[[runs]]
file = "fit.csv"
use = "fit"
[[runs]]
file = "held_out.csv"
use = "held-out"
[controller]
update_interval = "10 ms"
structures = ["PI"]
[requirements]
test_step = "2 mm"
overshoot = { at_most = "20 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = "not limited"
"""


def write_rig(folder: Path) -> list[Path]:
    """Two logs of a lag of 0.3 s with a gain of 10 mm/V, and the rig file; the logs' paths."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "rig.toml").write_text(RIG)
    logs = [folder / "fit.csv", folder / "held_out.csv"]
    for seed, log in enumerate(logs):
        log.write_text(_log(seed))
    return logs


def _log(seed: int) -> str:
    """y[k+1] = p y[k] + 10 (1 - p) u[k], p = exp(-0.01/0.3), with white noise of 0.05 mm."""
    generator = np.random.default_rng(seed)
    time = 0.01 * np.arange(900)
    command = np.repeat(generator.choice([-1.0, 0.0, 1.0], 9), 100)
    pole, level, lines = np.exp(-0.01 / 0.3), 0.0, ["t,u,y"]
    for moment, wanted in zip(time, command, strict=True):
        lines.append(f"{moment:.2f},{wanted:g},{level + generator.normal(0.0, 0.05):.4f}")
        level = pole * level + 10.0 * (1.0 - pole) * wanted
    return "\n".join(lines) + "\n"


def run(*arguments: object, inside: str = "", seconds: float = 200.0) -> subprocess.CompletedProcess[str]:
    """Run the program; `inside` is a line of shell that comes before it, in a mount namespace of its own."""
    call = [*PROGRAM, *map(str, arguments)]
    if inside:
        call = ["unshare", "--mount", "--map-root-user", "sh", "-c", f'{inside}\nexec "$@"', "sh", *call]
    return subprocess.run(call, capture_output=True, text=True, timeout=seconds, check=False)


def can_mount() -> bool:
    """Whether this machine lets us mount a small disk in a namespace of our own."""
    if shutil.which("unshare") is None or os.name != "posix":
        return False
    tried = subprocess.run(
        ["unshare", "--mount", "--map-root-user", "sh", "-c", "mount -t tmpfs -o size=64k tmpfs /mnt"],
        capture_output=True,
        check=False,
    )
    return tried.returncode == 0


def in_words(ended: subprocess.CompletedProcess[str], code: int, *words: str) -> None:
    """It ended with this code and an error in words."""
    assert ended.returncode == code, ended.stderr
    assert "Traceback" not in ended.stderr
    assert "a fault of the program itself" not in ended.stderr
    for word in words:
        assert word in ended.stderr
