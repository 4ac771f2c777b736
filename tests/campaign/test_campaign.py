"""The campaign under pytest: long, and only run when asked for by its mark."""

import pytest
from proof.many import run_many, tasks
from proof.table import line, summary


@pytest.mark.campaign
@pytest.mark.timeout(7200)
def test_released_gains_do_on_the_true_rig_what_was_asked(tmp_path):
    """40 rigs of five families: 90 % of the released right, half released; none of 18 that must be held released."""
    jobs = run_many(tasks(40, 18, seed=1, further=False), 2, tmp_path, lambda job: print(line(job), flush=True))
    rigs, kept = [job for job in jobs if not job.kind], [job for job in jobs if job.kind]
    print(summary(rigs, kept))
    good = sum(job.verdict == "released and good" for job in rigs)
    released = good + sum(job.verdict == "released and bad" for job in rigs)
    assert [job.verdict for job in jobs if job.verdict.startswith("fault")] == []
    assert [job.kind for job in kept if job.verdict == "wrongly released"] == []
    assert released >= 20
    assert good >= 0.9 * released


@pytest.mark.timeout(600)
def test_a_few_rigs_go_through_the_whole_job_and_nothing_bad_is_released(tmp_path):
    """The short form: a lag and a servo as they fall, and a held-out copy; no fault, nothing bad or wrong released."""
    few = [("rig", "lag with dead time", 1, 5), ("rig", "servo with friction", 1, 13)]
    few.append(("must hold", "held-out copied from a fit run", 1, 8))
    jobs = run_many(few, 1, tmp_path, lambda job: print(line(job), flush=True))
    assert [line(job) for job in jobs if job.verdict.startswith("fault")] == []
    assert [line(job) for job in jobs if job.verdict in ("released and bad", "wrongly released")] == []
    assert "copied" in jobs[2].kind
    assert jobs[2].status == "held"
    assert any(job.verdict == "released and good" for job in jobs)
