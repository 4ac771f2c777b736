"""The plug-in under a real RunEngine with simulated devices, its failures included: no fault of ours stops a plan."""

import re
import threading
import time
from pathlib import Path

import numpy as np
import pytest
from gainwright.io.plugin.documents import Documents, as_run
from gainwright.io.plugin.in_process import InProcess
from gainwright.io.plugin.jobs import Done, Job
from test_watching import RIG, log

for needed in ("bluesky", "ophyd", "event_model"):
    pytest.importorskip(needed, reason="the extra 'acquisition' is not installed")
pytestmark = pytest.mark.filterwarnings("default")


class Plant:
    """A simulated rig: a lag of 0.2 s behind a drive; it remembers every command it got."""

    def __init__(self) -> None:
        from ophyd import Signal

        plant = self
        self.commands: list[float] = []

        class Drive(Signal):
            def put(self, value, **kwargs):
                plant.commands.append(value)
                super().put(value, **kwargs)

        class Level(Signal):
            def get(self, **kwargs):
                now = time.monotonic()
                plant.level += (10.0 * plant.drive.get() - plant.level) * (1.0 - np.exp(-(now - plant.then) / 0.2))
                plant.then = now
                self._metadata["timestamp"] = time.time()
                return plant.level

        self.level, self.then = 0.0, time.monotonic()
        self.drive, self.response = Drive(name="drive", value=0.0), Level(name="level", value=0.0)

    def steps(self, points: int, *, planned: int | None = None):
        """A plan as README teaches it: whatever happens, the drive goes back to 0."""
        from bluesky import plan_stubs as bps
        from bluesky import preprocessors as bpp

        def body():
            yield from bps.open_run(md={"plan_name": "steps", "num_points": planned or points})
            for number in range(points):
                yield from bps.checkpoint()
                yield from bps.abs_set(self.drive, 1.0 if number > points // 3 else 0.0, wait=True)
                yield from bps.trigger_and_read([self.drive, self.response])
                yield from bps.sleep(0.002)
            yield from bps.close_run()

        def safe():
            yield from bps.abs_set(self.drive, 0.0, wait=True)

        return bpp.finalize_wrapper(body(), safe())


@pytest.fixture
def rig(tmp_path: Path) -> Path:
    text = RIG.replace('source = "u"', 'source = "drive"').replace('source = "y"', 'source = "level"')
    (tmp_path / "rig.toml").write_text(text, "utf-8")
    return tmp_path / "rig.toml"


def noting(job: Job) -> Done:
    assert job.fresh is not None
    return Done(job.key, job.label, job.folder, 0, "released", job.fresh.read_text("utf-8"))


class Bench:
    """A RunEngine with our plug-in among its subscribers."""

    def __init__(self, rig: Path, **changes: object) -> None:
        from bluesky import RunEngine

        self.results: list[Done] = []
        given = {"work": noting, "on_result": self.results.append, **changes}
        self.plugin = InProcess(rig, rig.parent / "out", **given)  # type: ignore[arg-type]
        self.documents = Documents(self.plugin, rig)
        self.engine = RunEngine({}, context_managers=[])
        self.engine.subscribe(self.documents)
        self.plant = Plant()

    def closed(self) -> list[Done]:
        assert self.plugin.close(60.0)
        assert self.results, (self.plugin.faults, self.documents.faults)
        return self.results


def samples(done: Done) -> np.ndarray:
    """(n, 3) time, command, response of the run that was written."""
    lines = done.said.splitlines()
    assert lines[0] == "time,command,response"
    return np.array([[float(cell) for cell in line.split(",")] for line in lines[1:]])


def test_a_whole_run_comes_back_as_a_result(rig: Path) -> None:
    """Every point with its own time; named by plan and scan number."""
    bench = Bench(rig)
    bench.engine(bench.plant.steps(30))
    (done,) = bench.closed()
    assert bench.plugin.faults == bench.documents.faults == ()
    assert done.label == "steps_1"
    rows = samples(done)
    assert len(rows) == 30
    assert np.all(np.diff(rows[:, 0]) > 0.0)
    assert rows[0, 1] == 0.0
    assert rows[-1, 1] == 1.0
    assert 0.0 < rows[-1, 2] < 10.0


def test_a_run_that_was_stopped_half_way_is_not_tuned_from_though_it_says_success(rig: Path) -> None:
    """RE.stop() ends a run with exit status success; the points that were planned and did not come tell."""
    bench = Bench(rig)
    threading.Timer(0.15, lambda: bench.engine.request_pause(defer=False)).start()
    from bluesky.utils import RunEngineInterrupted

    statuses: list[str] = []
    bench.engine.subscribe(lambda name, document: statuses.append(document["exit_status"]), "stop")
    with pytest.raises(RunEngineInterrupted):
        bench.engine(bench.plant.steps(500))
    bench.engine.stop()
    (done,) = bench.closed()
    assert statuses == ["success"]
    assert (done.status, done.code) == ("stopped early", 4)
    assert "of 500 planned points" in done.said
    assert bench.plant.commands[-1] == 0.0


def test_an_aborted_run_is_not_tuned_from_and_the_actuator_goes_back(rig: Path) -> None:
    """Exit status abort."""
    bench = Bench(rig)
    threading.Timer(0.15, lambda: bench.engine.request_pause(defer=False)).start()
    from bluesky.utils import RunEngineInterrupted

    with pytest.raises(RunEngineInterrupted):
        bench.engine(bench.plant.steps(500))
    bench.engine.abort("the test says so")
    (done,) = bench.closed()
    assert done.status == "stopped early"
    assert "abort" in done.said
    assert bench.plant.commands[-1] == 0.0


def test_a_paused_run_that_goes_on_is_whole(rig: Path) -> None:
    """Events since the last checkpoint may come twice; each point is used once."""
    bench = Bench(rig)
    threading.Timer(0.1, lambda: bench.engine.request_pause(defer=False)).start()
    from bluesky.utils import RunEngineInterrupted

    with pytest.raises(RunEngineInterrupted):
        bench.engine(bench.plant.steps(60))
    bench.engine.resume()
    (done,) = bench.closed()
    assert done.status == "released", done.said
    assert len(samples(done)) == 60


def test_no_fault_of_ours_stops_a_plan(rig: Path) -> None:
    """A rig file that is gone, a job and a callback that raise: the plan runs to its end, the faults are kept."""

    def broken(job: Job) -> Done:
        raise MemoryError("job")

    bench = Bench(rig, work=broken, on_result=lambda done: 1 / 0)
    bench.engine(bench.plant.steps(10))
    rig.unlink()
    other = Documents(bench.plugin, rig.parent / "nowhere.toml")
    bench.engine.subscribe(other)
    bench.engine(bench.plant.steps(10))
    assert bench.plugin.close(60.0)
    assert bench.plant.commands.count(0.0) >= 10
    assert bench.engine.state == "idle"
    kinds = {fault.strip().splitlines()[-1].split(":")[0] for fault in bench.plugin.faults}
    assert {"MemoryError", "FileNotFoundError"} <= kinds


def test_a_subscriber_of_ours_costs_the_plan_next_to_nothing(rig: Path) -> None:
    """While a slow job runs, 200 documents are taken in under 0.2 ms each."""
    go_on = threading.Event()

    def slow(job: Job) -> Done:
        go_on.wait(60.0)
        return noting(job)

    bench = Bench(rig, work=slow)
    bench.engine(bench.plant.steps(5))
    cost = []

    def timed(name: str, document: dict) -> None:
        begin = time.thread_time()
        bench.documents(name, document)
        cost.append(time.thread_time() - begin)

    bench.engine.unsubscribe(0)
    bench.engine.subscribe(timed)
    bench.engine(bench.plant.steps(200))
    go_on.set()
    bench.closed()
    assert len(cost) > 200
    assert sum(cost) / len(cost) < 2e-4


def test_event_pages_are_read_like_single_events(rig: Path) -> None:
    """Made with event_model's own composers, which check them; the time is among the data."""
    from event_model import compose_run

    keys = {name: {"source": "made", "dtype": "number", "shape": []} for name in ("t", "drive", "level")}
    bench = Bench(rig)
    run = compose_run(metadata={"num_points": 3})
    bench.documents("start", run.start_doc)
    stream = run.compose_descriptor(data_keys=keys, name="primary")
    bench.documents("descriptor", stream.descriptor_doc)
    data = {"t": [0.0, 0.1, 0.2], "drive": [0.0, 1.0, 1.0], "level": [5.0, 6.0, 7.0]}
    page = stream.compose_event_page(data=data, timestamps={key: [9.0, 9.1, 9.2] for key in data}, seq_num=[1, 2, 3])
    bench.documents("event_page", page)
    page["data"]["level"][0] = -1.0
    bench.documents("stop", run.compose_stop())
    (done,) = bench.closed()
    assert samples(done).tolist() == [[0.0, 0.0, 5.0], [0.1, 1.0, 6.0], [0.2, 1.0, 7.0]]


def test_one_event_of_arrays_is_a_whole_run(rig: Path) -> None:
    """Its time from the sample rate of the rig file; without one it is refused, and the plan doesn't notice."""
    event = {"descriptor": "d", "seq_num": 1, "data": {"drive": [0.0, 1.0], "level": [5.0, 6.0]},
             "timestamps": {"drive": 9.0, "level": 9.0}}  # fmt: skip
    for text, rows in (
        (
            rig.read_text("utf-8").replace('source = "t", unit = "s"', 'sample_rate = "2 Hz"'),
            [[9.0, 0.0, 5.0], [9.5, 1.0, 6.0]],
        ),
        (rig.read_text("utf-8"), None),
    ):
        rig.write_text(text, "utf-8")
        bench = Bench(rig)
        bench.documents("start", {"uid": "r", "time": 9.0})
        bench.documents("descriptor", {"uid": "d", "run_start": "r", "name": "primary"})
        bench.documents("event", event)
        bench.documents("stop", {"run_start": "r", "exit_status": "success", "num_events": {"primary": 1}})
        (done,) = bench.closed()
        if rows is None:
            assert done.status == "stopped early"
            assert "sample_rate" in bench.plugin.faults[0]
        else:
            assert samples(done).tolist() == rows


def test_lost_events_are_counted(rig: Path) -> None:
    """The stop document tells of one more than came."""
    from event_model import compose_run

    keys = {name: {"source": "made", "dtype": "number", "shape": []} for name in ("drive", "level")}
    bench = Bench(rig)
    run = compose_run()
    bench.documents("start", run.start_doc)
    stream = run.compose_descriptor(data_keys=keys, name="primary")
    bench.documents("descriptor", stream.descriptor_doc)
    for number in range(3):
        event = stream.compose_event(
            data={"drive": 0.0, "level": 1.0}, timestamps={"drive": 1.0, "level": 1.0 + number}
        )
        if number != 1:
            bench.documents("event", event)
    bench.documents("stop", run.compose_stop())
    (done,) = bench.closed()
    assert done.status == "stopped early"
    assert "1 of 3 events were lost" in done.said


def test_a_result_goes_back_as_a_new_run_that_the_model_accepts(tmp_path: Path) -> None:
    """start, descriptor, event and stop by event_model's schemas; the measured run is named and not touched."""
    from event_model import DocumentNames, schema_validators

    documents = as_run(Done("k", "run", tmp_path, 3, "held", "why", "lag", "PI, K = 2 V/mm"), "measured-uid")
    for name, document in documents:
        schema_validators[DocumentNames[name]].validate(document)
    assert [name for name, _ in documents] == ["start", "descriptor", "event", "stop"]
    assert documents[0][1]["analysis_of"] == ["measured-uid"]
    assert documents[2][1]["data"]["code"] == 3


def test_the_plan_of_the_readme_brings_the_actuator_back_whatever_happens(rig: Path) -> None:
    """The block as it stands there: run whole, and with a detector that fails half-way."""
    readme = (Path(__file__).parents[3] / "README.md").read_text("utf-8")
    (block,) = re.findall(r"<!-- plan -->\n```python\n(.*?)\n```", readme, re.DOTALL)
    scope: dict = {}
    exec(compile(block, "README.md", "exec"), scope)  # noqa: S102  (the document's own example)
    bench = Bench(rig)
    plant = bench.plant
    bench.engine(scope["step_test"](plant.drive, plant.response, levels=[0.5, 1.0], rest=0.0, points=5, interval=0.001))
    assert plant.commands[-1] == 0.0
    (done,) = bench.closed()
    assert (done.status, len(samples(done))) == ("released", 10)
    bench = Bench(rig)
    plant = bench.plant
    reads = iter(range(7))
    plant.response.get = lambda **kwargs: float(next(reads))
    with pytest.raises(RuntimeError):
        bench.engine(
            scope["step_test"](plant.drive, plant.response, levels=[0.5, 1.0], rest=0.0, points=5, interval=0.001)
        )
    assert plant.commands[-1] == 0.0
    assert bench.closed()[0].status == "stopped early"


def test_a_real_run_under_the_engine_is_judged_against_the_fit(rig: Path) -> None:
    """Nothing replaced: the simulated plant of the rig file's fit run, driven by the engine, in a process apart."""
    (rig.parent / "runs").mkdir()
    log(rig.parent / "runs" / "step_1.csv", 1)
    text = (rig.parent / "runs" / "step_1.csv").read_text("utf-8").replace("t,u,y", "t,drive,level")
    (rig.parent / "runs" / "step_1.csv").write_text(text, "utf-8")
    log(rig.parent / "fresh.csv", 2)
    values = np.loadtxt(rig.parent / "fresh.csv", delimiter=",", skiprows=1)
    results: list[Done] = []
    plugin = InProcess(rig, rig.parent / "out", on_result=results.append)
    documents = Documents(plugin, rig)
    from bluesky import RunEngine
    from bluesky import plan_stubs as bps
    from ophyd import Signal

    time_s, drive, level = (Signal(name=name, value=0.0) for name in ("t", "drive", "level"))

    def replay():
        yield from bps.open_run(md={"plan_name": "replay", "num_points": len(values)})
        for row in values:
            for signal, value in zip((time_s, drive, level), row.tolist(), strict=True):
                signal.put(value)
            yield from bps.trigger_and_read([time_s, drive, level])
        yield from bps.close_run()

    engine = RunEngine({}, context_managers=[])
    engine.subscribe(documents)
    engine(replay())
    assert plugin.close(120.0)
    (done,) = results
    assert plugin.faults == documents.faults == ()
    assert (done.status, done.code) == ("released", 0), done.said
    assert (done.folder / "gains.json").exists()
