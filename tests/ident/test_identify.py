"""Identification whole, on logs summed from closed-form step responses with noise of the test's own."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.catalogue import INTEGRATOR, LAG, TWO_LAGS
from gainwright.ident.errors import RecordError
from gainwright.ident.identify import identify
from gainwright.ident.run import Run
from scipy.signal import lfilter

TIME = 0.1 * np.arange(300)
PROFILE = ((3.0, 3.0), (12.0, 1.0), (20.0, 2.5))


def log(
    step, gain, dead_time, *, noise=0.02, seed=0, rho=0.6, level=5.0, profile=PROFILE, before=2.0, hold=None, time=TIME
):
    """A record; noise is relative to the movement's standard deviation, hold the command at which nothing drifts."""
    rng = np.random.default_rng(seed)
    command = step_sums.steps(time, profile, before)
    clean = step_sums.response(step, gain, dead_time, time, command, before)
    if hold is not None:
        clean = clean + gain * (before - hold) * time
    noisy = level + clean + step_sums.coloured(rng, len(time), noise * np.std(clean), rho)
    return Run(f"log {seed}", time, command, noisy)


def found(fit):
    """Values by name."""
    return {parameter.name: parameter for parameter in fit.parameters}


FAMILIES = {
    "lag": (step_sums.lag(1.3), -2.0, {"time constant": 1.3}),
    "two lags": (step_sums.two_lags(1.6, 0.7), 3.0, {"time constant 1": 1.6, "time constant 2": 0.7}),
    "resonance": (step_sums.resonance(2.2, 0.15), -0.4, {"natural frequency": 2.2, "damping ratio": 0.15}),
    "integrator": (step_sums.integrator(), 1.5, {}),
    "integrator with lag": (step_sums.integrator_with_lag(1.1), -0.8, {"time constant": 1.1}),
}


@pytest.mark.parametrize("name", FAMILIES)
def test_each_structure_is_recognised_and_its_numbers_lie_in_their_intervals(name):
    """Noise 2 % of the movement, coloured; dead time 0.43 s; the truth within four standard errors, those below 8 %."""
    step, gain, shapes = FAMILIES[name]
    fit = identify([log(step, gain, 0.43, hold=2.0 if "integrator" in name else None)])
    assert fit.structure == name
    truth = {"gain": gain, "dead time": 0.43, **shapes}
    parameters = found(fit)
    assert list(parameters) == list(truth)
    for key, value in truth.items():
        assert abs(parameters[key].value - value) < 4 * parameters[key].std_error, key
        assert parameters[key].low < parameters[key].value < parameters[key].high
    assert parameters["gain"].std_error < 0.08 * abs(gain)
    assert parameters["dead time"].std_error < 0.08
    # what is left is the noise: 2 % of the movement, give or take what 300 coloured samples leave
    assert fit.misfit == pytest.approx(0.02, rel=0.3)
    assert fit.candidates[0].structure == name
    assert sum(candidate.weight for candidate in fit.candidates) == pytest.approx(1.0)
    assert name in fit.explanation


def test_runs_of_different_levels_are_fitted_jointly():
    """Two runs from other levels, one of them twice as long: one plant, two levels, sharper than from one run alone."""
    longer = 0.1 * np.arange(500)
    one = log(step_sums.lag(1.3), 2.0, 0.43, seed=1)
    two = log(step_sums.lag(1.3), 2.0, 0.43, seed=2, level=9.0, time=longer, profile=((5.0, 1.0), (30.0, 3.0)))
    alone, both = identify([one], structures=[LAG]), identify([one, two], structures=[LAG])
    assert [run.offset for run in both.runs] == pytest.approx([5.0, 9.0], abs=0.1)
    assert found(both)["gain"].value == pytest.approx(2.0, abs=4 * found(both)["gain"].std_error)
    assert found(both)["gain"].std_error < found(alone)["gain"].std_error
    assert [len(run.model) for run in both.runs] == [300, 500]
    # the command that holds a response is as uncertain as the levels differ: 4 units over a gain of 2
    low, high = both.operating_command_interval
    assert high - low > 1.0


def test_a_run_from_another_command_says_so_by_its_level():
    """The second run rests at command 4, so its response starts 2 * 2 higher; both fitted levels are at command 2."""
    one = log(step_sums.lag(1.3), 2.0, 0.43, seed=1)
    two = log(step_sums.lag(1.3), 2.0, 0.43, seed=2, level=9.0, before=4.0, profile=((4.0, 3.0), (15.0, 5.0)))
    fit = identify([one, two], structures=[LAG])
    assert fit.operating_command == pytest.approx(2.0)
    assert [run.offset for run in fit.runs] == pytest.approx([5.0, 5.0], abs=0.1)


@pytest.mark.parametrize("gain", [1.5, -1.5])
def test_the_command_that_holds_an_integrating_plant_is_found(gain):
    """The log drifts from the start because its command of 2.0 is not the holding 2.3."""
    fit = identify([log(step_sums.integrator(), gain, 0.43, hold=2.3, seed=3)], structures=[INTEGRATOR])
    low, high = fit.operating_command_interval
    assert low < 2.3 < high
    assert high - low < 0.1
    assert fit.operating_command == pytest.approx(2.3, abs=0.03)
    assert np.quantile(fit.plausible.operating_command, [0.025, 0.975]) == pytest.approx(
        [low, high], abs=0.2 * (high - low)
    )


def test_a_stated_operating_command_is_believed():
    """Without drift of its own the integrator's gain is sharper, and the command is as stated on every plant."""
    run = log(step_sums.integrator(), 1.5, 0.43, hold=2.0, seed=4)
    stated = identify([run], structures=[INTEGRATOR], operating_command=2.0)
    free = identify([run], structures=[INTEGRATOR])
    assert stated.operating_command == 2.0
    assert np.all(stated.plausible.operating_command == 2.0)
    assert found(stated)["gain"].std_error <= found(free)["gain"].std_error * 1.05


def test_the_operating_response_moves_the_command_that_holds_it():
    """Level 5 at command 2, gain -2: a response of 8 is held by 2 - 3/2."""
    fit = identify([log(step_sums.lag(1.3), -2.0, 0.43)], structures=[LAG], operating_response=8.0)
    assert fit.operating_response == 8.0
    assert fit.operating_command == pytest.approx(0.5, abs=0.05)


def test_lost_samples_are_left_out_and_bridged_by_the_model():
    """A fifth of the samples lost, singly and in blocks, also at the very start: nothing is invented for them."""
    run = log(step_sums.lag(1.3), -2.0, 0.43, seed=5)
    response = run.response.copy()
    response[np.random.default_rng(0).choice(300, 40, replace=False)] = np.nan
    response[:3], response[150:170] = np.nan, np.nan
    fit = identify([Run("holes", run.time, run.command, response)], structures=[LAG, TWO_LAGS])
    parameters = found(fit)
    assert parameters["gain"].value == pytest.approx(-2.0, abs=4 * parameters["gain"].std_error)
    assert parameters["dead time"].value == pytest.approx(0.43, abs=4 * parameters["dead time"].std_error)
    assert fit.runs[0].response is response
    assert np.array_equal(np.isnan(fit.runs[0].model), np.isnan(response))


def test_a_record_whose_rest_is_lost_before_the_first_step_is_still_fitted():
    """Every sample before the step is lost: whether the rig stood still is not known, so its initial state is free."""
    run = log(step_sums.lag(1.3), -2.0, 0.43, seed=5)
    response = run.response.copy()
    response[:30] = np.nan
    fit = identify([Run("late", run.time, run.command, response)], structures=[LAG])
    assert found(fit)["gain"].value == pytest.approx(-2.0, abs=0.2)


def test_a_record_that_begins_in_full_motion_has_its_initial_state_fitted():
    """The command moves at once and the response is still falling from before."""
    run = log(step_sums.lag(2.5), 2.0, 0.43, seed=6, profile=((0.0, 3.0), (12.0, 1.0), (20.0, 2.5)), before=3.0)
    moving = Run("moving", run.time, run.command, run.response + 3.0 * np.exp(-run.time / 2.5))
    fit = identify([moving], structures=[LAG])
    assert found(fit)["gain"].value == pytest.approx(2.0, abs=0.1)
    assert found(fit)["time constant"].value == pytest.approx(2.5, abs=0.25)
    assert fit.misfit < 0.04


def test_the_command_before_the_record_is_part_of_the_truth():
    """The log begins with the step itself; 2 V before it is stated, and the operating point follows from it."""
    run = log(step_sums.lag(1.3), 2.0, 0.43, seed=7, profile=((0.0, 3.0), (12.0, 1.0)))
    stated = Run("step at once", run.time, run.command, run.response, command_before=2.0, at_rest=True)
    fit = identify([stated], structures=[LAG])
    assert fit.operating_command == pytest.approx(2.0)
    assert fit.operating_response == pytest.approx(5.0, abs=0.1)
    assert found(fit)["dead time"].value == pytest.approx(0.43, abs=0.05)


def test_a_straight_command_between_samples_is_told_from_a_held_one():
    """A lag under a random straight command, marched by its exact first-order formula; then the held one."""
    rng = np.random.default_rng(12)
    command = np.concatenate([np.zeros(20), rng.standard_normal(380)])
    time, slow, h = 0.1 * np.arange(400), 0.35, 0.1
    keep = np.exp(-h / slow)
    straight, held = np.zeros(400), np.zeros(400)
    for k in range(399):
        slope = (command[k + 1] - command[k]) / h
        # x' = (u - x)/T under u = u0 + slope t:  x - u + slope T decays as exp(-t/T)
        straight[k + 1] = command[k + 1] - slope * slow + keep * (straight[k] - command[k] + slope * slow)
        held[k + 1] = command[k] + keep * (held[k] - command[k])
    for kind, clean in (("interpolated", straight), ("held", held)):
        run = Run("busy", time, command, clean + 0.02 * rng.standard_normal(400))
        fit = identify([run], structures=[LAG])
        assert fit.between == kind
        assert kind in fit.explanation
        assert found(fit)["time constant"].value == pytest.approx(slow, rel=0.05)
        assert found(fit)["dead time"].value < 0.02


def test_a_held_command_that_a_forgotten_lag_makes_look_straight_leaves_the_dead_time_open():
    """Two lags fitted to three, 0.26, 0.12 and 0.05 s, under a held random command: the delay of 0.16 s and the third
    lag act together as 0.16 to 0.21 s; a straight command would need half an interval, 0.04 s, more.
    """
    rng = np.random.default_rng(3)
    fine, every = 0.002, 40
    level, held = 1.0, np.zeros(600)
    for k in range(10, 600):
        level = -level if rng.random() < 0.2 else level
        held[k] = level
    clean = np.concatenate([np.zeros(80), np.repeat(held, every)[:-80]])
    for slow in (0.26, 0.12, 0.05):
        keep = np.exp(-fine / slow)
        clean = lfilter([0.0, 1 - keep], [1.0, -keep], clean)
    noise = lfilter([1.0], [1.0, -0.8], rng.standard_normal(600))
    run = Run("busy", fine * every * np.arange(600), held, clean[::every] + 0.02 * noise)
    fit = identify([run], structures=[TWO_LAGS])
    dead_time = found(fit)["dead time"]
    assert dead_time.low < 0.21 < dead_time.high
    assert dead_time.high - dead_time.low > 0.04
    assert "don't tell it surely" in fit.explanation


def test_plausible_plants_are_as_many_and_as_wide_as_promised():
    """More than a thousand; where nothing ties, their gains and dead times spread as the printed intervals."""
    fit = identify([log(step_sums.lag(1.3), -2.0, 0.43, seed=8)], structures=[LAG])
    plants = fit.plausible.plants
    assert len(plants) == len(fit.plausible.operating_command) == len(fit.plausible.stiction) >= 1000
    gains = np.array([plant.static_gain for plant in plants])
    lags = np.array([plant.denominator[0] for plant in plants])
    dead_times = np.array([plant.dead_time for plant in plants])
    for name, values in (("gain", gains), ("dead time", dead_times), ("time constant", lags)):
        parameter = found(fit)[name]
        low, high = np.quantile(values, [0.025, 0.975])
        width = parameter.high - parameter.low
        assert low == pytest.approx(parameter.low, abs=0.06 * width)
        assert high == pytest.approx(parameter.high, abs=0.06 * width)
        assert np.std(values) == pytest.approx(parameter.std_error, rel=0.06)
    covariance = np.cov(np.array([gains, dead_times, lags]))
    assert np.corrcoef(gains, lags)[0, 1] == pytest.approx(
        fit.covariance[0, 2] / np.sqrt(fit.covariance[0, 0] * fit.covariance[2, 2]), abs=0.05
    )
    assert np.sign(covariance[1, 2]) == np.sign(fit.covariance[1, 2])


def test_five_times_the_noise_makes_intervals_five_times_as_wide():
    """Same log, same noise but for its size: 30 % is left for a colour that is estimated anew and a curved model."""
    narrow, wide = (identify([log(step_sums.lag(1.3), 2.0, 0.43, noise=n)], structures=[LAG]) for n in (0.01, 0.05))
    for name in ("gain", "time constant"):
        assert found(wide)[name].std_error == pytest.approx(5 * found(narrow)[name].std_error, rel=0.3)


def test_the_noise_is_described_as_it_was_made():
    """Standard deviation and colour of the added noise; the innovation is smaller by sqrt(1 - rho^2)."""
    time = 0.1 * np.arange(2000)
    run = log(
        step_sums.lag(1.3), 2.0, 0.43, rho=0.8, seed=9, time=time, profile=((20.0, 3.0), (90.0, 1.0), (150.0, 2.0))
    )
    clean = step_sums.response(step_sums.lag(1.3), 2.0, 0.43, run.time, run.command, 2.0)
    fit = identify([run], structures=[LAG])
    assert fit.noise.interval == pytest.approx(0.1)
    # 2000 samples of rho 0.8 are worth 220: a standard deviation errs by 5 %
    assert fit.noise.std == pytest.approx(0.02 * np.std(clean), rel=0.12)
    assert fit.noise.innovation_std == pytest.approx(0.6 * 0.02 * np.std(clean), rel=0.06)
    assert fit.noise.rho == pytest.approx(0.8, abs=0.06)


def test_a_command_that_never_moves_is_refused_with_advice():
    """No step, no identification; the message names the run and what to do."""
    run = Run("flat", TIME, np.full(300, 2.0), np.random.default_rng(0).standard_normal(300))
    with pytest.raises(RecordError, match=r"flat.*never moves(.|\n)*step"):
        identify([run])
    with pytest.raises(RecordError, match="no run"):
        identify([])


def test_a_response_that_never_moves_is_refused_with_advice():
    """A sensor that hangs at one reading, and a record of which next to nothing is left."""
    command = step_sums.steps(TIME, PROFILE, 2.0)
    with pytest.raises(RecordError, match=r"hung.*never moves(.|\n)*3(.|\n)*sensor"):
        identify([Run("hung", TIME, command, np.full(300, 3.0))])
    lost = np.full(300, np.nan)
    lost[[10, 50, 120, 200]] = [1.0, 2.0, 3.0, 2.0]
    with pytest.raises(RecordError, match=r"too few samples(.|\n)*4 that are not lost"):
        identify([Run("lost", TIME, command, lost)])


@pytest.mark.parametrize("scale", [1e-9, 1e9])
def test_the_units_of_response_and_time_change_nothing_but_the_numbers(scale):
    """The same record in units far apart: the same structure, misfit and relative intervals."""
    run = log(step_sums.lag(1.3), -2.0, 0.43)
    plain = identify([run])
    scaled = identify([Run("scaled", run.time / scale, run.command, run.response * scale)])
    assert scaled.structure == plain.structure
    assert scaled.misfit == pytest.approx(plain.misfit, rel=1e-3)
    for one, other, size in zip(plain.parameters, scaled.parameters, (scale, 1 / scale, 1 / scale), strict=True):
        assert other.value == pytest.approx(one.value * size, rel=1e-3)
        assert other.high - other.low == pytest.approx((one.high - one.low) * size, rel=0.05)


def test_an_interval_always_holds_its_own_value():
    """Noise that no plant explains: whatever is fitted, no number is printed outside its own interval."""
    noise = np.random.default_rng(0).standard_normal(300)
    fit = identify([Run("noise", TIME, step_sums.steps(TIME, PROFILE, 2.0), noise)])
    assert all(parameter.low <= parameter.value <= parameter.high for parameter in fit.parameters)
    assert fit.misfit > 0.8


def test_thirty_samples_are_enough_for_a_lag():
    """One step, 30 samples: no crash, and an interval that holds the truth."""
    time = np.arange(30.0)
    fit = identify([log(step_sums.lag(3.0), 2.0, 1.4, time=time, profile=((4.0, 3.0),), rho=0.0, seed=10)])
    assert "lag" in {fit.structure, *fit.ties}
    assert found(fit)["gain"].low < 2.0 < found(fit)["gain"].high or fit.structure != "lag"
    assert len(fit.plausible.plants) >= 1000


def test_the_same_seed_gives_the_same_plants():
    """Twice the same call, to the last digit; another seed draws others."""
    run = log(step_sums.lag(1.3), 2.0, 0.43)
    one, two, other = (identify([run], structures=[LAG], seed=seed) for seed in (3, 3, 4))
    assert one.plausible.plants == two.plausible.plants
    assert one.plausible.plants != other.plausible.plants


REPLICATES = 40
# Of 40 intervals of 95 %, 38 hold the truth on average; fewer than 33 has a chance of 0.07 % (binomial), against 82 %
# where the true coverage is 75 % and more than 99.9 % where it is the 50 % of plain standard errors at this colour.
FEWEST = 33


def test_intervals_hold_the_truth_as_often_as_they_say():
    """40 records of 120 samples of a lag under coloured noise (rho 0.8, 4 %): gain, dead time and lag, each alone."""
    time = 0.1 * np.arange(120)
    truth = {"gain": 2.0, "dead time": 0.43, "time constant": 0.9}
    hits = dict.fromkeys(truth, 0)
    for seed in range(REPLICATES):
        run = log(
            step_sums.lag(0.9),
            2.0,
            0.43,
            noise=0.04,
            rho=0.8,
            seed=1000 + seed,
            time=time,
            profile=((2.0, 3.0), (8.0, 1.5)),
        )
        parameters = found(identify([run], structures=[LAG]))
        for name, value in truth.items():
            hits[name] += parameters[name].low <= value <= parameters[name].high
    assert min(hits.values()) >= FEWEST, hits
