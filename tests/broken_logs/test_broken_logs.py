"""Each broken log gives its finding, as grave as it is; sound ones give none."""

import re
from pathlib import Path

import pytest
from gainwright.ident.errors import GainwrightError, RecordError
from gainwright.io.read_record import read_record
from gainwright.io.record import Finding
from gainwright.io.rigfile.load import load_rig
from gallery import GALLERY
from made import Broken, hdf5, log

RIG = """
[rig]
name = "invented"
[signals]
time = { source = "t", unit = "s" }
command = { source = "u", unit = "V" }
response = { source = "y", unit = "mm" }
[[runs]]
file = "FILE"
use = "fit"
[controller]
update_interval = "5 ms"
[requirements]
test_step = "2 mm"
overshoot = { at_most = "10 %" }
[limits]
command = { lowest = "-10 V", highest = "10 V" }
response = { lowest = "-400 mm", highest = "400 mm" }
"""


def look(broken: Broken, folder: Path) -> tuple[Finding, ...]:
    """Write the log and read it as a job would."""
    path = broken.write(folder)
    said = RIG.replace("FILE", path.name)
    for old, new in broken.rig:
        assert old in said
        said = said.replace(old, new)
    (folder / "rig.toml").write_text(said, "utf-8")
    rig = load_rig(folder / "rig.toml")
    return read_record(rig.runs[0], rig).findings


def test_the_gallery_has_sixty_logs() -> None:
    """At least."""
    assert len(GALLERY) >= 60


@pytest.mark.parametrize("name", GALLERY)
def test_a_broken_log_gives_its_finding(name: str, tmp_path: Path) -> None:
    """Of its kind, with a place, a size and what to do; as grave as it must be, and with no graver one beside it."""
    broken = GALLERY[name]
    if broken.refuses in ("error", "stops"):
        with pytest.raises(GainwrightError) as raised:
            look(broken, tmp_path)
        assert re.search(broken.finds, raised.value.text)
        assert raised.value.where
        assert raised.value.found
        assert broken.refuses == "error" or isinstance(raised.value, RecordError)
        return
    findings = look(broken, tmp_path)
    mine = [each for each in findings if re.fullmatch(broken.finds, each.kind)]
    assert mine, [each.text for each in findings]
    assert all(each.where and each.size and each.action for each in mine)
    if broken.refuses != "any":
        assert {each.refuses for each in mine} == {broken.refuses}
        others = [each.text for each in findings if each.refuses != "no" and each not in mine]
        assert others == []


@pytest.mark.parametrize("write", [log(), hdf5()], ids=["text", "HDF5"])
def test_the_log_that_all_are_made_of_is_sound(write, tmp_path: Path) -> None:
    """Nothing to say."""
    assert look(Broken(write, "", "no"), tmp_path) == ()
