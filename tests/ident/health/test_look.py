"""Health of a record: each sick log is seen as what it is, and no clean one is refused."""

from collections.abc import Callable

import numpy as np
import pytest
from gainwright.ident.health.look import Looked, look_at
from scipy.signal import lfilter

COUNT = 1200
INTERVAL = 0.01
TIME = INTERVAL * np.arange(COUNT)


def doublet() -> np.ndarray:
    """(1200,) 1 V up, down and up again after a second at rest."""
    return np.select([TIME < 1.0, TIME < 4.0, TIME < 7.0], [0.0, 1.0, -1.0], 0.5)


def lag(command: np.ndarray, constant: float = 30.0) -> np.ndarray:
    """Response of 10 mm/V with a time constant in samples."""
    pole = np.exp(-1.0 / constant)
    return np.asarray(lfilter([10.0 * (1.0 - pole)], [1.0, -pole], command))


def noise(seed: int, deviation: float = 0.05, memory: float = 0.0) -> np.ndarray:
    """(1200,) noise with first-order memory, mm."""
    white = np.random.default_rng(seed).standard_normal(COUNT)
    return np.asarray(deviation * lfilter([np.sqrt(1.0 - memory**2)], [1.0, -memory], white))


def look(command: np.ndarray, response: np.ndarray, time: np.ndarray = TIME, **ranges: object) -> Looked:
    """Look at a record in V and mm."""
    return look_at(time, command, response, command_unit="V", response_unit="mm", **ranges)  # type: ignore[arg-type]


def refusing(looked: Looked) -> dict[str, str]:
    """Findings that refuse, by kind."""
    return {seen.kind: seen.refuses for seen in looked.seen if seen.refuses != "no"}


def said(looked: Looked) -> set[str]:
    """Kinds of all findings."""
    return {seen.kind for seen in looked.seen}


def clean() -> np.ndarray:
    """The response to the doublet with its noise."""
    return lag(doublet()) + noise(3)


def spoiled(**changes: float) -> np.ndarray:
    """The clean response with samples of given indices (i42=...) changed."""
    response = clean()
    for place, value in changes.items():
        response[int(place[1:])] = value
    return response


def lose(response: np.ndarray, *phases: int) -> np.ndarray:
    """The response with the samples of these phases, of three, lost."""
    return np.where(np.isin(np.arange(COUNT) % 3, phases), np.nan, response)


def dead_zero() -> np.ndarray:
    """A sensor that reads 3.2 mm for ever."""
    return np.full(COUNT, 3.2)


# each sick record: command, response, and what must refuse
SICK: dict[str, tuple[Callable[[], np.ndarray], Callable[[], np.ndarray], dict[str, str]]] = {
    "constant response": (doublet, dead_zero, {"dead response": "stops"}),
    "white noise for a response": (doublet, lambda: noise(4), {"dead response": "holds"}),
    "coloured noise for a response": (doublet, lambda: noise(5, memory=0.8), {"dead response": "holds"}),
    "rounded noise for a response": (doublet, lambda: np.round(noise(6) / 0.05) * 0.05, {"dead response": "holds"}),
    "every sample lost": (doublet, lambda: np.full(COUNT, np.nan), {"too few samples": "stops"}),
    "command that never moves": (lambda: np.full(COUNT, 2.0), lambda: 20.0 + noise(7), {"idle command": "stops"}),
    "clipped at the top": (doublet, lambda: np.minimum(clean(), 8.0), {"clipping": "holds"}),
    "clipped at the bottom": (doublet, lambda: np.maximum(clean(), -7.0), {"clipping": "holds"}),
    "clipped and rounded to 12 bit": (
        doublet, lambda: np.round(np.clip(clean(), -9.0, 9.0) / 0.01) * 0.01, {"clipping": "holds"}),
    "clipped at rest, from the start": (doublet, lambda: np.maximum(clean(), 1.0), {"clipping": "holds"}),
    "frozen in the middle": (
        doublet, lambda: np.where((TIME > 5.0) & (TIME < 6.5), 2.5, clean()), {"stuck response": "holds"}),
    "frozen to the end": (doublet, lambda: np.where(TIME > 4.2, clean()[420], clean()), {"stuck response": "holds"}),
    "two thirds lost": (doublet, lambda: lose(clean(), 0, 1), {"lost samples": "stops"}),
    "a third lost": (doublet, lambda: lose(clean(), 0), {"lost samples": "holds"}),
}  # fmt: skip


@pytest.mark.parametrize("name", SICK)
def test_a_sick_record_is_refused_for_its_illness_alone(name: str) -> None:
    """One refusing finding, of the right kind."""
    command, response, wanted = SICK[name]
    assert refusing(look(command(), response())) == wanted


def test_a_clean_record_has_nothing_to_say() -> None:
    """10 mm/V, 0.3 s, 0.05 mm of noise: no finding of any kind."""
    assert look(doublet(), clean()).seen == ()


def test_a_sensor_in_its_declared_range_is_clean_and_at_its_end_is_not() -> None:
    """One noisy touch of the end is no clipping; two samples in a row are."""
    touched = np.minimum(clean(), np.sort(clean())[-1])
    top = float(touched.max())
    assert refusing(look(doublet(), touched, response_range=(-20.0, top))) == {}
    twice = spoiled(i350=top, i351=top)
    assert refusing(look(doublet(), twice, response_range=(-20.0, top))) == {"clipping": "holds"}
    assert refusing(look(doublet(), clean(), response_range=(-20.0, 20.0))) == {}


def test_a_command_beyond_its_declared_range_holds() -> None:
    """1 V was logged where 0.8 V is the end."""
    assert refusing(look(doublet(), clean(), command_range=(-2.0, 0.8))) == {"command out of range": "holds"}


def test_lone_spikes_are_taken_out_and_nothing_else() -> None:
    """Three spikes of 5 mm, two of them near each other, become lost samples."""
    looked = look(doublet(), spoiled(i300=20.0, i303=-3.0, i900=40.0))
    assert np.flatnonzero(np.isnan(looked.response)).tolist() == [300, 303, 900]
    assert said(looked) == {"spikes", "lost samples"}
    assert refusing(looked) == {}


def test_zeros_of_the_logger_are_dropouts() -> None:
    """Four exact zeros at a level of 80 mm, the record's first sample among them."""
    response = 80.0 + clean()
    response[[0, 256, 512, 768]] = 0.0
    looked = look(doublet(), response)
    assert np.flatnonzero(np.isnan(looked.response)).tolist() == [0, 256, 512, 768]
    assert said(looked) == {"dropouts", "lost samples"}


def test_a_response_to_a_pulse_of_the_command_is_no_spike() -> None:
    """A fast plant answers a command of one sample with one sample."""
    command = np.zeros(COUNT)
    command[[200, 500, 800]] = 5.0
    looked = look(command, np.roll(10.0 * command, 1) + noise(8))
    assert np.isfinite(looked.response).all()


def test_a_gap_is_harmless_only_where_the_command_stands_still() -> None:
    """Half a second is missing: at rest it is said, across a step it holds."""
    at_rest = (TIME < 2.0) | (TIME >= 2.5)
    looked = look(doublet()[at_rest], clean()[at_rest], TIME[at_rest])
    assert (said(looked), refusing(looked)) == ({"gap"}, {})
    at_step = (TIME < 3.8) | (TIME >= 4.3)
    assert refusing(look(doublet()[at_step], clean()[at_step], TIME[at_step])) == {"gap": "holds"}
    single = np.delete(np.arange(COUNT), [123, 399, 801])
    assert refusing(look(doublet()[single], clean()[single], TIME[single])) == {}


def test_too_few_samples_stop() -> None:
    """Twelve are too few, thirty are said to be few."""
    chosen = slice(95, 107)
    assert refusing(look(doublet()[chosen], clean()[chosen], TIME[chosen])) == {"too few samples": "stops"}
    chosen = slice(85, 1185, 36)
    looked = look(doublet()[chosen], clean()[chosen], TIME[chosen])
    assert "few samples" in said(looked)
    assert refusing(looked) == {}


def test_coarse_readings_an_unsettled_start_and_an_early_end_are_said() -> None:
    """None of them refuses."""
    coarse = look(doublet(), np.round(clean() / 2.0) * 2.0)
    assert said(coarse) == {"coarse response"}
    drifting = look(doublet(), clean() + np.where(TIME < 1.0, 4.0 * (1.0 - TIME), 0.0))
    assert said(drifting) == {"unsettled start"}
    early = look(doublet()[:720], clean()[:720], TIME[:720])
    assert said(early) == {"early end"}
    assert not refusing(coarse) | refusing(drifting) | refusing(early)


def test_a_coarse_rest_that_toggles_by_one_count_is_no_clipping() -> None:
    """At rest at the record's highest value after a toggle, then away without noise: entered by one count only."""
    index = np.arange(COUNT)
    away = np.where(index < 60, 0.0, -0.01 * (index - 60.0) * (1.0 + index / 600.0))
    response = np.round(away / 0.004) * 0.004
    response[1] = -0.004
    assert refusing(look(np.where(index < 50, 0.0, -1.0), response)) == {}


COMMANDS: dict[str, Callable[[int, np.random.Generator], np.ndarray]] = {
    "step": lambda n, rng: np.where(np.arange(n) < n // 8, 0.0, 1.0),
    "step at the start": lambda n, rng: np.where(np.arange(n) < 1, 0.0, 1.0),
    "doublet": lambda n, rng: np.select([np.arange(n) < n * k // 8 for k in (1, 2, 3, 4)], [0.0, 1.0, 0.0, -1.0], 0.0),
    "staircase": lambda n, rng: np.repeat(rng.normal(size=8), n // 8 + 1)[:n],
    "binary": lambda n, rng: np.repeat(rng.choice([-1.0, 1.0], size=n // 5 + 1), 5)[:n],
    "random": lambda n, rng: rng.normal(size=n),
    "sweep": lambda n, rng: np.sin(2.0 * np.pi * (0.001 + 0.02 * np.arange(n) / n) * np.arange(n)),
    "square": lambda n, rng: np.where((np.arange(n) // (n // 12)) % 2, 1.0, -1.0),
}


def clean_log(seed: int) -> tuple[np.ndarray, np.ndarray]:
    """A random clean record: plant, command, noise of 25 to 80 dB with or without memory, rounded or not."""
    rng = np.random.default_rng((20261201, seed))
    count = int(rng.choice([120, 400, 2000]))
    command = COMMANDS[list(COMMANDS)[seed % len(COMMANDS)]](count, rng)
    driven = np.roll(command, shift := int(rng.integers(0, count // 30)))
    driven[:shift] = command[0]
    pole = np.exp(-1.0 / rng.choice([0.3, 3.0, 30.0, count / 6]))
    damping, period = rng.choice([0.01, 0.05, 0.3]), rng.choice([5.0, 20.0, count / 8])
    radius = np.exp(-2.0 * np.pi * damping / period)
    ring = [1.0, -2.0 * radius * np.cos(2.0 * np.pi / period * np.sqrt(1.0 - damping**2)), radius**2]
    responses = (
        lfilter([1.0 - pole], [1.0, -pole], driven),
        lfilter([1.0 - pole], [1.0, -pole], lfilter([1.0 - pole], [1.0, -pole], driven)),
        lfilter([sum(ring)], ring, driven),
        4.0 * np.cumsum(driven) / count,
        4.0 * np.cumsum(lfilter([1.0 - pole], [1.0, -pole], driven)) / count,
    )
    response = responses[(seed // len(COMMANDS)) % 5] * rng.choice([-3.0, 0.2, 40.0])
    memory = rng.choice([0.0, 0.5, 0.9, 0.98])
    size = np.std(response) * 10.0 ** (-rng.choice([25.0, 35.0, 50.0, 80.0]) / 20.0)
    response = response + size * lfilter([np.sqrt(1.0 - memory**2)], [1.0, -memory], rng.normal(size=count))
    bits = rng.choice([0, 10, 12, 16])
    if bits:
        quantum = np.ptp(response) * rng.choice([1.3, 3.0]) / 2.0**bits
        response = np.round(response / quantum) * quantum
    return command, response


@pytest.mark.parametrize("seed", range(200))
def test_no_clean_record_is_refused(seed: int) -> None:
    """Eight commands, five plants, five times each: a false refusal would keep good rigs from being released."""
    command, response = clean_log(seed)
    looked = look(command, response, INTERVAL * np.arange(len(command)))
    assert refusing(looked) == {}
    assert np.mean(np.isnan(looked.response)) < 0.005
