"""Many jobs: in the journal before and after, a bad one stops no other, a dead worker loses nothing."""

from collections.abc import Iterator
from concurrent.futures import BrokenExecutor, Executor, Future, ThreadPoolExecutor
from pathlib import Path

import pytest
from gainwright.ident.errors import GainwrightError, RequestError
from gainwright.io.plugin import many
from gainwright.io.plugin.jobs import Done, Job, gravest
from gainwright.io.plugin.journal import Journal
from gainwright.io.plugin.many import process_pool, run_jobs
from stand_in import quick_work, whole


def make_jobs(folder: Path, texts: list[str]) -> list[Job]:
    """One job a text, each with a rig file of that content."""
    jobs = []
    for number, text in enumerate(texts):
        rig_file = folder / f"rig_{number}.toml"
        rig_file.write_text(text, "utf-8")
        jobs.append(Job(f"{number:064d}", f"job {number}", rig_file, folder / "out" / f"{number}"))
    return jobs


def codes(ended: Iterator[Done] | list[Done]) -> dict[str, int]:
    return {done.label: done.code for done in ended}


def test_a_fault_of_one_job_is_recorded_and_the_rest_goes_on(tmp_path: Path) -> None:
    """On any executor; here threads."""
    jobs = make_jobs(tmp_path, ["fine", "fault", "held"])
    with Journal(tmp_path) as journal:
        ended = list(run_jobs(jobs, journal, lambda: ThreadPoolExecutor(2), at_once=2, work=quick_work))
        assert codes(ended) == {"job 0": 0, "job 1": 1, "job 2": 3}
        assert [entry.code for entry in journal.entries()] == [0, 1, 3]
    assert next(done.said for done in ended if done.code == 1).startswith("ZeroDivisionError: made up")
    assert gravest([done.code for done in ended]) == 1
    assert whole(jobs[0].folder)
    assert whole(jobs[2].folder)


def test_a_job_that_kills_its_worker_is_given_up_and_loses_no_other(tmp_path: Path) -> None:
    """Processes: the guilty one is found by trying the suspects alone."""
    jobs = make_jobs(tmp_path, ["fine", "poison", "fine", "held", "fine"])
    with Journal(tmp_path) as journal:
        ended = list(run_jobs(jobs, journal, lambda: process_pool(2), at_once=3, work=quick_work))
    assert codes(ended) == {"job 0": 0, "job 1": 1, "job 2": 0, "job 3": 3, "job 4": 0}
    assert "died" in next(done.said for done in ended if done.code == 1)
    assert all(whole(job.folder) for job in jobs if job.label != "job 1")


def test_results_that_are_whole_are_not_written_again_after_a_kill(tmp_path: Path) -> None:
    """A worker that died between its results and its answer: the receipt says that the job was done."""
    jobs = make_jobs(tmp_path, ["fine"])
    with Journal(tmp_path) as journal:
        first = quick_work(jobs[0])
        changed = (jobs[0].folder / "gains.json").stat().st_mtime_ns
        ended = list(run_jobs(jobs, journal, lambda: process_pool(1), at_once=1, work=quick_work))
    assert ended == [first]
    assert (jobs[0].folder / "gains.json").stat().st_mtime_ns == changed
    assert whole(jobs[0].folder)


def test_a_sheet_without_its_receipt_or_a_receipt_without_its_sheet_is_done_again(tmp_path: Path) -> None:
    """Neither tells that everything is there."""
    (job,) = make_jobs(tmp_path, ["fine"])
    quick_work(job)
    (job.folder / "job.json").unlink()
    quick_work(job)
    assert (job.folder / "gains.superseded.json").exists()
    (job.folder / "gains.json").unlink()
    (job.folder / "gains.superseded.json").unlink()
    quick_work(job)
    assert (job.folder / "gains.json").exists()


def test_a_journal_is_one_programs_at_a_time_and_survives_it(tmp_path: Path) -> None:
    """The second one is refused; the first one's entries are there for the next."""
    with Journal(tmp_path) as journal:
        assert journal.begin("k", "run 1", tmp_path) == 1
        with pytest.raises(RequestError, match="another program keeps the journal"), Journal(tmp_path):
            pass
        assert journal.done("k") is None
        journal.end("k", 3, "held", "why")
    with Journal(tmp_path) as journal:
        entry = journal.done("k")
        assert entry is not None
        assert (entry.label, entry.code, entry.said) == ("run 1", 3, "why")
        assert journal.begin("k", "run 1", tmp_path) == 2
        assert journal.done("k") is None
        journal.end("k", 1, "fault", "broken")
        assert journal.done("k") is None


def test_the_gravest_code_is_a_fault_then_a_wrong_call_then_a_bad_log() -> None:
    """In the order of the exit codes' table: 1, 2, 4, 3, 0."""
    order = [1, 2, 4, 3, 0]
    for place, code in enumerate(order):
        assert gravest(order[place:]) == code


def test_a_machine_on_which_no_worker_lives_is_an_error_in_words(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """After the first death no worker comes up again: the program's own fault code, and what is done is kept."""
    jobs = make_jobs(tmp_path, ["fine", "poison"])
    pools = iter([process_pool(1)])
    monkeypatch.setattr(many, "MOST_STARTS", 2)
    with Journal(tmp_path) as journal:
        with pytest.raises(GainwrightError, match="no worker stays alive"):
            list(run_jobs(jobs, journal, lambda: next(pools, None) or Stillborn(), at_once=1, work=quick_work))
        assert [entry.code for entry in journal.entries()] == [0, None]


class Stillborn(Executor):
    """Its workers die before they begin."""

    def submit(self, *arguments: object, **more: object) -> Future:  # type: ignore[override]
        future: Future = Future()
        future.set_exception(BrokenExecutor("dead"))
        return future
