"""The short form of the fuzzer: some seconds of each kind, seeded; the long one is `run.py`."""

import random
from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from judged import Verdict
from kinds import KINDS

COUNTS = {"csv": 700, "rigfile": 1500, "table": 700, "hdf5": 60}


def faults(verdicts: list[Verdict]) -> list[str]:
    return [verdict.fault.key + "\n" + verdict.fault.text for verdict in verdicts if verdict.fault is not None]


@pytest.mark.parametrize("seed", [1, 2])
@pytest.mark.parametrize("name", COUNTS)
def test_no_hostile_input_gets_more_than_a_refusal(tmp_path: Path, name: str, seed: int) -> None:
    """Sound and spoilt inputs in turns: no traceback, no hang, no exit 1, the log untouched, both ends reached."""
    kind, dice, codes = KINDS[name], random.Random(seed), set()
    deep = tmp_path / "one" / "two"
    deep.mkdir(parents=True)
    for number in range(COUNTS[name]):
        content = kind.fresh(dice)
        verdicts = list(kind.run(deep, content))
        assert faults(verdicts) == [], (number, content[:2000])
        codes |= {verdict.code for verdict in verdicts}
    assert codes & {0, 3}
    assert codes & {2, 4}


@pytest.mark.parametrize("name", ["csv", "rigfile"])
@settings(
    max_examples=150,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(
    content=st.one_of(st.binary(max_size=300), st.text(max_size=200).map(lambda text: text.encode("utf-8", "replace")))
)
@example(content=b"")
@example(content=b"\x00")
def test_any_bytes_at_all_get_no_more_than_a_refusal(tmp_path: Path, name: str, content: bytes) -> None:
    """Bytes that never were a log or a rig file."""
    deep = tmp_path / "one" / "two"
    deep.mkdir(parents=True, exist_ok=True)
    assert faults(list(KINDS[name].run(deep, content))) == []
