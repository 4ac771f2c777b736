"""Sound logs of two hundred true rigs: a false finding would keep a good rig waiting."""

import sys
from collections import Counter
from pathlib import Path

import numpy as np
from gainwright.ident.health.look import look_at

CHECKOUT = Path(__file__).resolve().parents[2]
for folder in (CHECKOUT / "tests" / "campaign", CHECKOUT / "sample_runs"):
    if str(folder) not in sys.path:
        sys.path.insert(0, str(folder))

from proof.families import FAMILIES, FURTHER, draw  # noqa: E402  (found through the path above)
from proof.logs import FIT, PULSES, draw_sensor, draw_style, profile, record, sense  # noqa: E402

TRUE = {"coarse response", "few samples", "early end", "slow sampling"}  # said where it is so, and no judgement


def sound_log(family: str, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Time, command and response of a test as an engineer runs it; the rig shares no code with gainwright."""
    generator = np.random.default_rng((20261201, seed, sum(map(ord, family))))
    drawn = draw(family, generator)
    style = draw_style(drawn, generator)
    levels = PULSES[seed % len(PULSES)] if drawn.integrating else FIT[seed % len(FIT)]
    changes, duration = profile(drawn, levels, generator)
    clean = record(drawn.rig, changes, duration, style.interval, 0.0, seed)
    made = sense(clean, draw_sensor(drawn, [clean], style.interval, generator), generator)
    return made.time, made.command, made.reading


def test_at_most_one_of_two_hundred_sound_logs_gives_a_false_finding() -> None:
    """Eight kinds of rig, twenty-five each; none is refused."""
    said: Counter[str] = Counter()
    logs = [(family, seed) for family in (*FAMILIES, *FURTHER) for seed in range(25)]
    assert len(logs) == 200
    for family, seed in logs:
        time, command, response = sound_log(family, seed)
        seen = look_at(time, command, response, command_unit="V", response_unit="mm").seen
        said.update({f"{family} {seed}: {each.kind} ({each.size})" for each in seen if each.kind not in TRUE})
        assert [each for each in seen if each.refuses != "no"] == []
    assert sum(said.values()) <= 1, said
