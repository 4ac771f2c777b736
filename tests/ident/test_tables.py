"""Frequency tables: made from closed forms with noise of a known size, and what is found again."""

import mpmath
import numpy as np
import pytest
from gainwright.ident.errors import RecordError
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from gainwright.ident.tables import Table

RESONANCE = {"gain": 4.0, "dead time": 0.05, "natural frequency": 3.0, "damping ratio": 0.02}
LAG = {"gain": 2.0, "dead time": 0.3, "time constant": 1.0}
WIDE, NARROW = np.geomspace(0.3, 30.0, 60), np.geomspace(0.1, 10.0, 20)


def resonance(s: complex) -> complex:
    """4 wn^2 exp(-0.05 s)/(s^2 + 2 z wn s + wn^2), wn = 3, z = 0.02, by mpmath."""
    return complex(4 * 9 * mpmath.exp(-0.05 * s) / (s * s + 2 * 0.02 * 3 * s + 9))


def lag(s: complex) -> complex:
    """2 exp(-0.3 s)/(s + 1), by mpmath."""
    return complex(2 * mpmath.exp(-0.3 * s) / (s + 1))


def measured(plant, frequency, seed, error=0.01, **kept) -> Table:
    """The exact response with independent relative noise of `error` on both parts, phases unwrapped."""
    random = np.random.default_rng(seed)
    exact = np.array([plant(mpmath.mpc(0, float(w))) for w in frequency])
    noisy = exact * (1 + error * (random.standard_normal(len(exact)) + 1j * random.standard_normal(len(exact))))
    columns = {"phase": np.unwrap(np.angle(noisy)), "magnitude_error": error * np.abs(noisy),
               "phase_error": np.full(len(exact), error)}  # fmt: skip
    return Table("table", frequency, np.abs(noisy), **{key: columns.get(key) for key in kept.get("with_", columns)})


def found(*tables, runs=()):
    """Structure and parameters by name."""
    fit = identify(runs, tables=tables, operating_command=0.0, operating_response=0.0)
    return fit, {parameter.name: parameter for parameter in fit.parameters}


def test_a_lightly_damped_resonance_is_found_from_its_table():
    """Damping 0.02 to 5 %, frequency to 0.1 %: the theory gives 1.3 % and 0.026 % for this noise and these points.

    Near a peak of half width z wn the relative response moves by 1 for a move of 2 z wn in frequency, and a handful of
    the 60 points with 1 % noise lie there.
    """
    fit, values = found(measured(resonance, WIDE, 1))
    assert fit.structure == "resonance"
    assert values["damping ratio"].value == pytest.approx(0.02, rel=0.05)
    assert values["natural frequency"].value == pytest.approx(3.0, rel=1e-3)
    assert fit.misfit == pytest.approx(0.01 * np.sqrt(2), rel=0.2)


@pytest.mark.parametrize("with_", [("phase", "magnitude_error", "phase_error"), ("phase",)])
def test_intervals_of_a_table_hold_the_truth_as_often_as_they_say(with_):
    """95 % intervals over 20 tables of 1 % noise, three parameters each: 60 cases, 52 or more by chance in 99 %.

    Binomial, n = 60, p = 0.95: fewer than 52 have a probability of 0.7 %. The parameters of one table are correlated,
    which the bound leaves room for by its rounding.
    """
    inside = 0
    for seed in range(20):
        _, values = found(measured(lag, NARROW, seed, with_=with_))
        inside += sum(values[name].low <= true <= values[name].high for name, true in LAG.items() if name in values)
    assert inside >= 52


def test_a_table_and_a_run_in_time_are_fitted_together():
    """A step of 20 s with noise of 0.05 alone, and with a table: gain and operating point from the run, dead time from
    the table, whose interval is a fraction of the run's."""
    time = np.arange(0.0, 20.0, 0.05)
    after = np.clip(time - 2.3, 0.0, None)
    noise = 0.05 * np.random.default_rng(5).standard_normal(time.size)
    run = Run("step", time, np.where(time < 2.0, 3.0, 4.0), 50.0 + 2.0 * (1 - np.exp(-after)) + noise)
    alone, both = identify([run]), identify([run], tables=[measured(lag, NARROW, 3)])
    width = {name: next(p.high - p.low for p in fit.parameters if p.name == "dead time")
             for name, fit in (("alone", alone), ("both", both))}  # fmt: skip
    assert width["both"] < 0.3 * width["alone"]
    assert both.noise.std == pytest.approx(0.05, rel=0.15)
    assert (both.operating_command, both.operating_response) == (pytest.approx(3.0), pytest.approx(50.0, abs=0.02))
    for parameter in both.parameters:
        assert abs(parameter.value - LAG[parameter.name]) < 4 * parameter.std_error
    assert both.tables[0].label == "table"


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_magnitudes_take_sign_and_dead_time_from_a_run(sign: float):
    """A step of a plant of either sign fixes what a table without phases can't; the table sharpens the lag."""
    time = np.arange(0.0, 20.0, 0.05)
    after = np.clip(time - 2.3, 0.0, None)
    noise = 0.05 * np.random.default_rng(6).standard_normal(time.size)
    run = Run("step", time, np.where(time < 2.0, 0.0, 1.0), sign * 2.0 * (1 - np.exp(-after)) + noise)
    fit = identify([run], tables=[measured(lag, NARROW, 3, with_=("magnitude_error",))])
    values = {parameter.name: parameter for parameter in fit.parameters}
    assert values["gain"].value == pytest.approx(sign * 2.0, rel=0.01)
    assert values["time constant"].value == pytest.approx(1.0, rel=0.02)
    assert values["dead time"].value == pytest.approx(0.3, abs=0.02)


def test_magnitudes_alone_give_the_plant_but_for_sign_and_dead_time():
    """Positive gain and no dead time are taken; what magnitudes do tell is right to 5 %."""
    fit, values = found(measured(resonance, WIDE, 1, with_=("magnitude_error",)))
    assert fit.structure == "resonance"
    assert values["damping ratio"].value == pytest.approx(0.02, rel=0.1)
    assert values["natural frequency"].value == pytest.approx(3.0, rel=2e-3)
    assert values["dead time"].high == 0.0


def test_coherence_weighs_the_points():
    """Half the points with twenty times the noise, and a coherence that says so (Bendat and Piersol's formula): the
    gain is several times surer than without it."""
    noise = np.where(np.arange(20) % 2, 0.2, 0.01)
    random = np.random.default_rng(7)
    exact = np.array([lag(mpmath.mpc(0, float(w))) for w in NARROW])
    averages = 50
    coherence = 1.0 / (1.0 + 2.0 * averages * noise**2)  # solves (1 - g2)/(2 g2 nd) = noise^2
    errors = {True: [], False: []}
    for _ in range(6):
        noisy = exact * (1 + noise * (random.standard_normal(20) + 1j * random.standard_normal(20)))
        for weighed in (True, False):
            given = coherence if weighed else None
            table = Table("t", NARROW, np.abs(noisy), np.unwrap(np.angle(noisy)), coherence=given)
            fit, _ = found(table)
            errors[weighed].append(abs(fit.plant.static_gain / 2.0 - 1.0))
    assert np.median(errors[True]) < 0.3 * np.median(errors[False])


def test_a_table_alone_needs_an_operating_point():
    """It knows deviations only; so much is said."""
    with pytest.raises(RecordError, match=r"does not tell where the rig stood[\s\S]*operating_point"):
        identify((), tables=[measured(lag, NARROW, 1)])


def test_what_tables_alone_do_not_show_is_said():
    """Friction, bounds and noise are not in them; beside a run in time nothing is said."""
    fit, _ = found(measured(lag, NARROW, 2))
    assert any("neither friction, play" in caution for caution in fit.cautions)
    assert fit.noise.std == 0.0


def test_points_that_scatter_more_than_their_errors_say_are_cautioned_about():
    """Errors stated at a fifth of what they are: the intervals go by the points, and it is said."""
    table = measured(lag, NARROW, 2)
    small = Table("t", table.frequency, table.magnitude, table.phase, table.magnitude_error / 5, table.phase_error / 5)
    fit, _ = found(small)
    assert any("times their stated errors" in caution for caution in fit.cautions)
