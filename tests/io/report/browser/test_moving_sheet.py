"""The moving gain sheet in a real browser: what it computes against the program, and how it is moved."""

import base64
import json
import math
import re
from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.compensator import with_loop_gain
from gainwright.design.discretise import columns_of
from gainwright.design.gains import Gains
from gainwright.design.requirements import Limits, Requirement, Requirements
from gainwright.design.trajectories import trajectory
from gainwright.design.values import values_of
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from gainwright.io.report.moving import sweep_of
from gainwright.io.report.page import report_html

CLOSE = 1e-6  # issue 7: page and program agree to this


def friction_outcome(made):
    """A drive that friction holds, P on it, its command limited in level and rate, pushed and stepped both ways."""
    plants = [Plant((gain,), (lag, 1.0, 0.0), 0.013) for gain in (5.5, 6.0, 6.5) for lag in (0.07, 0.08, 0.09)]
    some = Plausible(tuple(plants), np.full(9, 3.0), np.full(9, 0.05))
    fit = replace(made.fit, plant=Plant((6.0,), (0.08, 1.0, 0.0), 0.013), plausible=some)
    items = (
        Requirement("overshoot", 0.25, "at_most", "%", 100.0),
        Requirement("settling_time", 1.6, "at_most", "s", band=0.02),
        Requirement("rise_time", 0.6, "at_most", "s"),
        Requirement("disturbance_peak", 4.0, "at_most", "mm", command_step=1.0),
        Requirement("disturbance_recovery", 2.0, "at_most", "s", band=3.0, command_step=1.0),
        Requirement("phase_margin", 45.0, "at_least", "deg"),
    )
    limits = Limits(0.5, 5.0, 20.0, 0.0, 300.0, 600.0)
    rig = replace(made.rig, requirements=Requirements(items, 20.0, both_directions=True), limits=limits)
    gains = Gains("P", 0.5)
    selection = replace(made.design.selection, loop_gain=0.5, intervals=(), intervals_plausible=(), rows=())
    return replace(made, fit=fit, rig=rig, design=replace(made.design, gains=gains, selection=selection))


def lagged_outcome(made):
    """The made-up lag under PI with a limited command and a filter before the controller."""
    setting = replace(made.rig.setting, response_filter_time=0.03)
    limits = replace(made.rig.limits, command_highest=5.0, response_rate=900.0)
    return replace(made, rig=replace(made.rig, setting=setting, limits=limits))


def sticking_outcome(made):
    """The same lag behind a valve that sticks, pushed and stepped both ways: it hunts."""
    count = len(made.fit.plausible.plants)
    valves = np.column_stack([np.linspace(0.10, 0.14, count), np.full(count, 0.03), np.linspace(-0.05, 0.05, count)])
    items = (
        Requirement("overshoot", 0.25, "at_most", "%", 100.0),
        Requirement("settling_time", 3.0, "at_most", "s", band=0.05),
        Requirement("rise_time", 1.0, "at_most", "s"),
        Requirement("disturbance_peak", 8.0, "at_most", "mm", command_step=0.5),
        Requirement("disturbance_recovery", 3.0, "at_most", "s", band=1.5, command_step=0.5),
    )
    rig = replace(made.rig, requirements=Requirements(items, 20.0, both_directions=True))
    fit = replace(made.fit, plausible=replace(made.fit.plausible, valves=valves))
    return replace(made, fit=fit, rig=rig)


def continuous_outcome(made):
    """A controller that isn't sampled, its command limited, no dead time: the fine law that stands in for it runs in
    the page, and sees the response half an interval ahead."""
    setting = replace(made.rig.setting, update_interval=0.0, computation_delay=0.0, continuous=True)
    rig = replace(made.rig, setting=setting, limits=replace(made.rig.limits, command_highest=5.0))
    plants = tuple(replace(plant, dead_time=0.0) for plant in made.fit.plausible.plants)
    plausible = replace(made.fit.plausible, plants=plants)
    fit = replace(made.fit, plant=replace(made.fit.plant, dead_time=0.0), plausible=plausible)
    return replace(made, rig=rig, fit=fit, design=replace(made.design, continuous=True))


@pytest.fixture(scope="module", params=[lagged_outcome, friction_outcome, sticking_outcome, continuous_outcome])
def outcome(request, made):
    return request.param(made)


def number(value):
    return math.inf if value in ("inf", "never") else math.nan if value is None else float(value)


def gains_at(outcome, gain):
    """The design's gains with another K."""
    return with_loop_gain(outcome.design.gains, gain)


def test_the_page_runs_the_law_as_the_program_does_at_twenty_gains(outcome, opened):
    """Moved by key over the ribbon: response, command, extremes and times of the page agree to 1e-6 of their size."""
    from selenium.webdriver.common.keys import Keys

    sweep = sweep_of(outcome, outcome.fit, outcome.design)
    situation = sweep.fitted.situation
    stops = np.arange(0, 160, 8)
    laws = columns_of([gains_at(outcome, float(sweep.gains[index])) for index in stops])
    values = values_of(sweep.fitted, np.zeros(stops.size, dtype=int), laws)
    page = opened(report_html(outcome))
    page.ribbon.send_keys(Keys.HOME)
    compared = 0
    for stop, index in enumerate(stops):
        said = page.heard
        assert said["index"] == index
        assert said["gain"] == pytest.approx(float(sweep.gains[index]), rel=1e-14)
        page.ribbon.send_keys(Keys.ARROW_RIGHT * 8)
        if not said["stable"]:
            continue
        compared += 1
        gains = gains_at(outcome, said["gain"])
        agree_in_values(said, values, stop, outcome)
        few = few_of(outcome.fit.plausible)
        agree_in_time(said["fitted"], trajectory(gains, outcome.fit.plant, few, situation, 2.0))
    assert compared >= 12


def few_of(plausible):
    """Three of the plants; the fitted one leads them behind the median valve of all."""
    few = plausible.take([0, 1, 2])
    if plausible.valves is None:
        return few
    return replace(few, valves=np.tile(np.median(plausible.valves, axis=0), (3, 1)))


def agree_in_values(said, values, stop, outcome):
    """Each requirement and each extreme of the fitted plant."""
    names = [row["row"]["name"] for row in said["rows"]]
    assert names == [item.name for item in outcome.rig.requirements.items]
    for row in said["rows"]:
        name, wanted = row["row"]["name"], values.of[row["row"]["name"]][stop]
        assert number(row["best"]) == pytest.approx(wanted, rel=CLOSE, abs=CLOSE * row["row"]["limit"]), name
    assert {"overshoot", "settling_time"} <= set(said["fitted"]["values"])
    for name, value in values.extremes.items():
        assert said["fitted"]["extremes"][name] == pytest.approx(value[stop], rel=CLOSE), name


def agree_in_time(fitted, program):
    """Response and command at the program's own times, as shares of the step and of the command's sway."""
    spacing = fitted["time"][1]
    rows = np.round(program.time / spacing).astype(int)
    seen = rows < len(fitted["time"])
    step = abs(program.setpoint[0] - program.response[0])
    assert np.asarray(fitted["response"])[rows[seen]] == pytest.approx(program.response[seen], abs=CLOSE * step)
    held = np.round(program.time / fitted["held"][1]).astype(int)
    inside = held < len(fitted["held"])
    sway = np.ptp(program.command)
    assert np.asarray(fitted["command"])[held[inside]] == pytest.approx(program.command[inside], abs=CLOSE * sway)


def data_of(text):
    return json.loads(re.search(r'id="moving-data">(.*?)</script>', text, re.DOTALL)[1])


@pytest.fixture(scope="module")
def released(made):
    return report_html(made)


def test_the_stored_poles_close_the_loop_at_every_gain(made, released):
    """1 + K G_L(s) = 0 at each, G_L written out for the made-up PI on a lag: within 1e-6 of |1 + K G_L|'s terms."""
    data = data_of(released)
    gains = made.design.gains
    compared = 0
    for branch in data["locus"]["branches"]:
        for k, re_, im in zip(data["gains"], branch["re"], branch["im"], strict=True):
            if re_ is None:
                continue
            s = complex(re_, im)
            lag = 12.0 / (0.5 * s + 1) * np.exp(-s * (0.12 + 0.002)) * (1 - np.exp(-s * 0.02)) / (s * 0.02)
            assert abs(1 + k * (s + gains.integral / gains.proportional) / s * lag) < CLOSE
            compared += 1
    assert compared > 2 * len(data["gains"])


def test_the_stored_gains_hold_the_chosen_one_and_every_edge(made, released):
    """About 161 rising gains; an edge of any row or set inside the ribbon is one of them."""
    data = data_of(released)
    gains = np.asarray(data["gains"])
    assert 150 <= gains.size <= 170
    assert np.all(np.diff(gains) > 0)
    assert gains[data["chosen"]] == made.design.selection.loop_gain
    rows = [interval for row in data["rows"] for interval in row["intervals"]]
    edges = [edge for each in (*rows, *data["together"], *data["plausible"]) for edge in each if edge]
    assert edges
    assert all(np.any(gains == edge) for edge in edges if gains[0] < edge < gains[-1])


def test_the_stored_bands_are_those_of_the_plausible_plants(made, released):
    """Each plant's own test step at the chosen K, run one by one: 95 % lie inside the band at each time."""
    data = data_of(released)
    sweep = sweep_of(made, made.fit, made.design)
    time = np.asarray(data["band"]["time"])
    low, high = (
        np.frombuffer(base64.b64decode(data["band"][f"response_{side}"]), "<f4").reshape(-1, time.size)
        for side in ("low", "high")
    )
    i = data["chosen"]
    assert low[i] == pytest.approx(sweep.response.low[:, i], rel=CLOSE)
    assert high[i] == pytest.approx(sweep.response.high[:, i], rel=CLOSE)
    inside = []
    for plant in made.fit.plausible.plants:
        own = trajectory(made.design.gains, plant, made.fit.plausible.take([0]), sweep.fitted.situation, 3.3)
        response = np.interp(time, own.time, own.response)
        inside.append((response >= low[i] - 1e-4) & (response <= high[i] + 1e-4))
    share = np.mean(inside, axis=0)
    assert share.min() >= 0.9
    assert np.all(high[i] >= low[i])


def test_keys_move_the_ribbon_and_a_screen_reader_is_told(opened, released, made):
    """Arrows by one, page by ten, home and end to the ends; the value is said in words with its unit."""
    from selenium.webdriver.common.keys import Keys

    page = opened(released)
    chosen, last = data_of(released)["chosen"], len(data_of(released)["gains"]) - 1
    assert page.ribbon.aria_role == "slider"
    assert page.ribbon.accessible_name == "Moving gain sheet: what another K would do"
    for _ in range(3):  # what is folded above it, such as the further forms of the gains, can be reached first
        page.driver.switch_to.active_element.send_keys(Keys.TAB)
        if page.driver.switch_to.active_element == page.ribbon:
            break
    assert page.driver.switch_to.active_element == page.ribbon
    for key, wanted in (
        (Keys.ARROW_RIGHT, chosen + 1), (Keys.ARROW_LEFT, chosen), (Keys.PAGE_UP, chosen + 10),
        (Keys.PAGE_DOWN, chosen), (Keys.HOME, 0), (Keys.ARROW_LEFT, 0), (Keys.END, last), (Keys.ARROW_UP, last),
    ):  # fmt: skip
        page.ribbon.send_keys(key)
        assert int(page.ribbon.get_attribute("aria-valuenow")) == wanted
    said = page.ribbon.get_attribute("aria-valuetext")
    assert re.match(r"K = [\d.]+ V/mm, [\d.]+ times the chosen one\. ", said)
    assert "for study" in page.driver.find_element("css selector", ".now").text
    page.driver.find_element("css selector", "[data-part=back]").click()
    assert int(page.ribbon.get_attribute("aria-valuenow")) == chosen
    assert page.driver.switch_to.active_element == page.ribbon
    assert "0.13 V/mm, the chosen one" in page.ribbon.get_attribute("aria-valuetext")
    assert "1200 plausible plants checked 98.1 % meet" in page.ribbon.get_attribute("aria-valuetext")


def test_dragging_the_ribbon_moves_the_poles_the_step_and_the_beads(opened, released):
    """The handle goes where the pointer goes, to the next stored gain; nothing else takes the pointer."""
    from selenium.webdriver.common.action_chains import ActionChains

    page = opened(released)
    before = picture_of(page)
    line = page.run("const b = document.querySelector('.drag .grip').getBoundingClientRect(); return b.x + b.width / 2")
    left = page.run("return document.querySelector('.drag').getBoundingClientRect().x")
    box = page.ribbon.rect
    x = line - left - box["width"] / 2
    start = page.run("return document.querySelector('.drag').getAttribute('aria-valuenow')")
    ActionChains(page.driver).move_to_element_with_offset(page.ribbon, int(x), 0).click_and_hold().move_by_offset(
        -60, 5
    ).release().perform()
    after = picture_of(page)
    moved = page.run(
        "const b = document.querySelector('.drag .grip').getBoundingClientRect(); return b.x + b.width / 2"
    )
    assert int(page.ribbon.get_attribute("aria-valuenow")) < int(start)
    assert moved == pytest.approx(line - 60, abs=5)
    assert all(before[name] != after[name] for name in before), [name for name in before if before[name] == after[name]]
    for name in ("locus", "step", "headroom"):
        element = page.driver.find_element("css selector", f"[data-part={name}]")
        ActionChains(page.driver).drag_and_drop_by_offset(element, 40, 10).perform()
        assert picture_of(page) == after


def picture_of(page):
    """What is drawn of each part."""
    return page.run(
        "return Object.fromEntries(['ribbon', 'locus', 'step', 'headroom'].map("
        "(name) => [name, document.querySelector(`[data-part=${name}]`).innerHTML]))"
    )


def test_each_picture_names_its_quantities_with_units(opened, released):
    """Axes, units and marks of the moving pictures, by their texts and shapes."""
    page = opened(released)
    texts = page.run("return [...document.querySelectorAll('#moving svg text')].map((each) => each.textContent)")
    for said in (
        "loop gain K (V/mm), logarithmic", "← lower K", "higher K →", "all together", "on plausible plants", "slack",
        "real part (1/s)", "imaginary part (1/s)", "response (mm)", "command (V)",
        "time since the controller saw the new setpoint (s)", "command highest", "response lowest",
    ):  # fmt: skip
        assert said in texts, said
    count = page.run("return document.querySelectorAll('.drag .bead').length")
    assert count == 6  # one a requirement of the made-up job
    assert page.run("return document.querySelectorAll('.drag .many').length") == 6
    assert page.run("return document.querySelectorAll('[data-part=locus] .pole').length") >= 4


def test_at_the_chosen_gain_the_sheet_says_what_the_table_says(made, released):
    """Bands and worst cases there are those of all plants that the printed gains were checked on."""
    data = data_of(released)
    i = data["chosen"]
    for row, judged in zip(data["rows"], made.design.judged, strict=False):
        assert (row["low"][i], row["high"][i]) == pytest.approx((judged.low, judged.high)), row["name"]
    worst = {each.name: each.predicted_worst for each in made.design.limits}
    assert {limit["name"]: limit["worst"][i] for limit in data["limits"]} == pytest.approx(worst)
