"""The forked child of the fuzzer answers as the real one does."""

import random
from pathlib import Path

import hdf5_inputs
import pytest
from forked import ask_forked
from gainwright.ident.errors import RecordError
from gainwright.io.readers.child import ask_child

CHILD = "gainwright.io.readers.hdf5_child"


@pytest.mark.parametrize("seed", range(3))
def test_a_fork_answers_as_the_started_child_does(tmp_path: Path, seed: int) -> None:
    """A sound tree, one with spoilt bytes, and one that is cut."""
    dice = random.Random(seed)
    content = hdf5_inputs.sound(dice)
    changed = (content, hdf5_inputs.spoil(content, dice), content[: len(content) // 2])[seed]
    log = tmp_path / "log.h5"
    log.write_bytes(changed)
    request = {"file": str(log), "group": None, "sources": None}
    assert ask_forked(CHILD, request, str(log)) == ask_child(CHILD, request, str(log))


def test_a_fork_that_does_not_end_is_ended(tmp_path: Path) -> None:
    """The bound on the wall clock is the parent's."""
    with pytest.raises(RecordError, match="takes too long"):
        ask_forked("forked_endless", {"file": "", "group": None, "sources": None}, "a log", seconds=1.0)
