"""What `gainwright process` prints and draws: the verdict, the working, the sheet for programs, pictures as files."""

import json
import math
import re
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest
from gainwright.io import deliver as delivery
from gainwright.io.commands.main import main
from gainwright.io.outcome import Outcome
from gainwright.io.sheet import sheet_bytes, sheet_of

PNG_MARK = b"\x89PNG\r\n\x1a\n"  # the format's own first eight bytes (PNG specification, section 5.2)


@pytest.fixture
def command(made: Outcome, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys):
    """The command line with a finished job in place of the job; gives the exit code and what was printed."""
    monkeypatch.setattr(delivery, "deliver", lambda *_, **__: made)

    def call(*options: str):
        code = main(["process", str(tmp_path / "rig.toml"), *options])
        printed = capsys.readouterr()
        return code, printed.out, printed.err

    return call


def test_json_prints_the_gain_sheet_and_nothing_else(command, made: Outcome) -> None:
    """A program reads standard output as it stands: the bytes of gains.json."""
    code, out, _ = command("--json")
    assert code == 0
    assert out.encode() == sheet_bytes(sheet_of(made))
    sheet = json.loads(out)
    assert sheet["schema"] == "gainwright.gain-sheet/1"
    assert sheet["status"] == "released"


def test_v_shows_vector_lengths_whose_product_gives_k(command) -> None:
    """The printed factors multiply to 1/K by hand: K = 0.13 V/mm of the made-up job, to the six printed digits."""
    code, out, _ = command("-v")
    assert code == 0
    table = out[out.index("Magnitude condition") : out.index("written to")]
    assert max(len(line) for line in table.splitlines()) <= 100
    product, gain = 1.0, math.nan
    for line in table.splitlines():
        found = re.search(r"([\d.]+(?:e-?\d+)?)  (times|divided by)$", line)
        if found:
            product *= float(found[1]) if found[2] == "times" else 1.0 / float(found[1])
        if "K = 1/|G_L|" in line:
            gain = float(re.search(r"([\d.]+) V/mm", line)[1])
    assert gain == 0.13
    assert product * gain == pytest.approx(1.0, abs=2e-5)
    assert "vector from zero z1" in table


def test_without_v_the_verdict_is_one_screen_without_the_working(command) -> None:
    """40 lines of 100 columns at the most, no escape sequence in a pipe."""
    _, out, _ = command()
    assert "Magnitude condition" not in out
    assert len(out.splitlines()) <= 40
    assert "\x1b" not in out


def test_pictures_writes_each_picture_as_svg_and_png(command, tmp_path: Path) -> None:
    """Whole files under the names of the report's pictures; each SVG is well-formed and fetches nothing."""
    code, out, err = command("--pictures", str(tmp_path / "drawn"))
    assert code == 0
    names = {path.name for path in (tmp_path / "drawn").iterdir()}
    kinds = {"step", "ribbon", "headroom", "ladder", "log-0", "locus", "margins", "held-out-0"}
    assert names == {f"{kind}{ending}" for kind in kinds for ending in (".svg", ".png")}
    for name in names:
        content = (tmp_path / "drawn" / name).read_bytes()
        if name.endswith(".png"):
            assert content.startswith(PNG_MARK)
            continue
        root = ET.fromstring(content)
        assert root.get("aria-label")
        assert not re.search(rb"(?:href|src)=\"(?!#)", content)
    assert "drawing margins" in err
    assert f"pictures to {tmp_path / 'drawn'}" in out


def test_pictures_that_cannot_be_written_end_with_2(command, tmp_path: Path) -> None:
    """A file stands where the folder should be: said with the way out."""
    (tmp_path / "drawn").write_text("a file")
    code, _, err = command("--pictures", str(tmp_path / "drawn"))
    assert code == 2
    assert "--pictures" in err
