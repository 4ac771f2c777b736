"""Released means all conditions; each that fails is one reason that an engineer can act on."""

from dataclasses import replace

import pytest
from gainwright.design.requirements import Requirement
from gainwright.io.record import Finding
from gainwright.io.release import reasons_to_hold


def reasons(made, twins=()) -> tuple[str, ...]:
    """Why the made job is held."""
    return reasons_to_hold(made.rig, made.records, made.design, made.closing, twins)


def only(made, twins=()) -> str:
    """The one reason."""
    found = reasons(made, twins)
    assert len(found) == 1, found
    return found[0]


def with_limits(made, **changes):
    """The same with other hardware limits."""
    return replace(made, rig=replace(made.rig, limits=replace(made.rig.limits, **changes)))


def with_verdicts(made, *verdicts: str):
    """The held-out comparison repeated with these verdicts."""
    one = made.closing[0]
    named = [replace(one, label=f"run_{n}", verdict=v, why=f"why {n}") for n, v in enumerate(verdicts)]
    return replace(made, closing=tuple(named))


def compared_to_itself(made):
    """The held-out record was fitted too, and its comparison was therefore set aside."""
    return replace(made, closing=(replace(made.closing[0], verdict="not comparable", why="its samples were fitted"),))


def test_a_job_that_meets_every_condition_is_released(made) -> None:
    """No reason at all."""
    assert reasons(made) == ()


def test_a_job_without_a_held_out_run_is_held(made) -> None:
    """The reason says what to record and how to name it in the rig file."""
    assert 'use = "held-out"' in only(replace(made, closing=()))


def test_a_held_out_run_that_disagrees_holds_even_beside_one_that_agrees(made) -> None:
    """One disagreement is enough, and only that one is named."""
    assert only(with_verdicts(made, "agrees", "disagrees")) == (
        "held-out run_1 disagrees with the prediction: why 1"
    )


def test_a_held_out_run_that_is_not_comparable_holds_when_no_other_agrees(made) -> None:
    """Beside one that agrees it is no obstacle."""
    assert "can't be compared" in only(with_verdicts(made, "not comparable"))
    assert reasons(with_verdicts(made, "not comparable", "agrees")) == ()


def test_a_held_out_run_whose_samples_were_fitted_holds_even_beside_one_that_agrees(made) -> None:
    """Whatever the file's name: the reason names both."""
    fitted, held_out = made.records
    text = only(made, twins=[(held_out, fitted)])
    assert "step_2.csv" in text
    assert "fitted as step_1.csv" in text
    assert only(compared_to_itself(made), twins=[(held_out, fitted)]) == text


@pytest.mark.parametrize(
    ("key", "words"),
    [
        ("command_lowest", "command has no lowest"),
        ("command_highest", "command has no highest"),
        ("response_lowest", "response has no lowest"),
        ("response_highest", "response has no highest"),
    ],
)
def test_a_limit_that_was_not_given_holds(made, key: str, words: str) -> None:
    """A missing limit is not a limit that does not matter."""
    text = only(with_limits(made, **{key: None}))
    assert words in text
    assert "not limited" in text


def test_limits_said_not_to_matter_do_not_hold(made) -> None:
    """Infinity stands for "not limited"."""
    assert reasons(with_limits(made, response_lowest=-float("inf"), response_highest=float("inf"))) == ()


def test_a_missing_rate_limit_does_not_hold(made) -> None:
    """The made rig has no response rate; only the levels are asked for."""
    assert made.rig.limits.response_rate is None
    assert reasons(with_limits(made, command_rate=None)) == ()


def test_a_guessed_key_holds_until_its_mark_is_removed(made) -> None:
    """The reason names the key."""
    guessed = replace(made, rig=replace(made.rig, guessed=("signals.response",)))
    assert "signals.response is still marked" in only(guessed)


def test_a_finding_that_holds_is_a_reason_and_a_mended_one_is_not(made) -> None:
    """The made records carry a harmless finding each already."""
    clipping = Finding("clipping", "2 s to 3 s", "10 samples at 300 mm", "repeat the run at lower amplitude", "holds")
    clipped = replace(made.records[0], findings=(clipping,))
    text = only(replace(made, records=(clipped, made.records[1])))
    assert text.startswith("step_1.csv: clipping (2 s to 3 s")


def test_too_small_a_share_of_plants_holds_and_names_what_binds(made) -> None:
    """949 of 1000 is not 95 %, and is not rounded up to it."""
    judged = (replace(made.design.judged[0], met=False), *made.design.judged[1:])
    text = only(made.with_design(share_meeting=0.94999, judged=judged))
    assert text.startswith("94.9 % of the plausible plants")
    assert text.endswith("not met at that share: overshoot")
    assert reasons(made.with_design(share_meeting=0.95)) == ()


def test_one_unstable_plausible_plant_holds(made) -> None:
    """Confidence is no excuse for an unstable loop."""
    assert "unstable" in only(made.with_design(all_stable=False))


def test_too_few_plausible_plants_hold(made) -> None:
    """A thousand are asked for."""
    assert "only 999" in only(made.with_design(plants_checked=999))
    assert reasons(made.with_design(plants_checked=1000)) == ()


def test_a_passed_response_limit_holds_with_both_numbers(made) -> None:
    """Limit and worst prediction, so that the reader sees by how much."""
    passed = replace(made.design.limits[0], predicted_worst=312.5, headroom=-12.5, met=False)
    text = only(made.with_design(limits=(passed,), limits_kept=False))
    assert "300 mm" in text
    assert "312.5 mm" in text


def test_a_passed_limit_that_has_no_row_holds_too(made) -> None:
    """The flag alone is enough."""
    assert "limit of the response is passed" in only(made.with_design(limits_kept=False))


def test_a_missed_floor_holds_where_no_margin_was_asked_for(made) -> None:
    """The floors are the program's own, and said to be common practice."""
    judged = tuple(
        replace(each, predicted=21.0, met=False) if each.requirement.name == "phase_margin" else each
        for each in made.design.judged
    )
    text = only(made.with_design(judged=judged))
    assert "floor for phase margin is missed: 21 deg" in text
    assert "at least 30 deg" in text


def test_floors_that_nobody_judged_hold(made) -> None:
    """Without a margin of one's own each floor must have been looked at."""
    bare = made.with_design(judged=made.design.judged[:2])
    assert len(reasons(bare)) == 3
    margin = Requirement("phase_margin", 40.0, "at_least", "deg")
    asked = replace(bare.rig.requirements, items=(*bare.rig.requirements.items, margin))
    assert reasons(replace(bare, rig=replace(bare.rig, requirements=asked))) == ()


def test_what_the_design_says_itself_is_passed_on_and_not_said_again(made) -> None:
    """The design explains its own failures better; the same words twice are one reason."""
    said = ("12 of 1000 plausible plants are unstable with these gains",) * 2
    assert only(made.with_design(reasons=said, all_stable=False, share_meeting=0.5)) == said[0]


def test_every_failing_condition_is_said_not_only_the_first(made) -> None:
    """A person mends all of them in one go."""
    broken = with_limits(replace(made, closing=()).with_design(all_stable=False), command_lowest=None)
    assert len(reasons(broken)) == 3


def test_no_controller_at_all_holds(made) -> None:
    """There is nothing to release."""
    found = reasons_to_hold(made.rig, made.records, None, made.closing)
    assert found == ("no controller was found that could be judged",)
