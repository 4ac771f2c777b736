"""Many rig files at once: on this machine or on a cluster, resumable, with a page over all of them."""

import json
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from contextlib import AbstractContextManager, contextmanager
from dataclasses import asdict
from importlib.metadata import version
from pathlib import Path

from ...ident.errors import GainwrightError, RequestError
from ..write_whole import OutputFolder
from .folder import content_key
from .jobs import Done, Job, Work, do, receipt
from .journal import Journal
from .many import process_pool, run_jobs

SUMMARY, OVERVIEW = "batch.json", "overview.html"
Makers = tuple[Callable[[], Executor], int]


def batch(
    rig_files: Sequence[Path],
    out: Path,
    executors: AbstractContextManager[Makers],
    ended: Callable[[Done, int, int], None],
    *,
    with_report: bool = True,
    work: Work = do,
) -> tuple[Done, ...]:
    """Do the job of each rig file; those that are done already are taken from their receipts.

    Parameters
    ----------
    rig_files : sequence of Path
    out : Path
        For the journal, the summary and the overview; each job's results go beside its rig file.
    executors : context manager
        `processes` or `cluster`.
    ended : callable
        Gets each job as it ends, how many have ended, and how many there are.
    with_report : bool
    work : callable

    Returns
    -------
    tuple of Done
        In the order of the rig files. The summary and the overview hold what has ended, also after an interrupt.

    Raises
    ------
    RequestError
        When the journal can't be kept in `out`, or another batch holds it.
    """
    folders = result_folders(rig_files)
    finished: dict[Path, Done] = {}

    def note(done: Done) -> None:
        finished[done.folder] = done
        ended(done, len(finished), len(folders))

    with Journal(out) as journal:
        try:
            with executors as (make, at_once):
                todo = _todo(folders, journal, with_report, note)
                for done in run_jobs(todo, journal, make, at_once=at_once, work=work):
                    note(done)
        finally:
            ordered = tuple(finished[folder] for folder in folders.values() if folder in finished)
            _write(out, ordered, len(folders))
    return ordered


def result_folders(rig_files: Sequence[Path]) -> dict[Path, Path]:
    """Where each job's results go: out/ beside the rig file, or out/NAME/ where several stand side by side.

    Parameters
    ----------
    rig_files : sequence of Path
        One named twice is one job.

    Examples
    --------
    >>> folders = result_folders([Path("/a/rig.toml"), Path("/b/one.toml"), Path("/b/two.toml")])
    >>> [str(folder) for folder in folders.values()]
    ['/a/out', '/b/out/one', '/b/out/two']
    """
    whole = list(dict.fromkeys(file.resolve() for file in rig_files))
    beside = Counter(file.parent for file in whole)
    alike = Counter(file.with_suffix("") for file in whole)
    folders = {}
    for file in whole:
        name = file.stem if alike[file.with_suffix("")] == 1 else file.name
        folders[file] = file.parent / "out" if beside[file.parent] == 1 else file.parent / "out" / name
    return folders


@contextmanager
def processes(workers: int) -> Iterator[Makers]:
    """Processes on this machine."""
    yield (lambda: process_pool(workers)), workers + 1


@contextmanager
def cluster(address: str) -> Iterator[Makers]:
    """The workers of a running dask.distributed scheduler, which must see the same files under the same names.

    Raises
    ------
    RequestError
        When distributed isn't installed, or no scheduler answers.
    """
    try:
        from distributed import Client
    except ImportError as cause:
        raise RequestError(
            "a cluster needs the package distributed",
            where=f"--scheduler {address}",
            found="it is not installed here",
            advice="pip install 'gainwright[cluster]', here and on the workers, or leave --scheduler out",
        ) from cause
    try:
        client = Client(address, timeout=10, set_as_default=False)
    except (OSError, ValueError) as cause:
        raise RequestError(
            "no scheduler answers",
            where=f"--scheduler {address}",
            found=str(cause),
            expected="the address of a running scheduler, such as tcp://10.0.0.1:8786",
        ) from cause
    try:
        threads = sum(client.nthreads().values())
        if threads == 0:
            raise RequestError("the scheduler has no workers", where=f"--scheduler {address}", advice="start some")
        yield client.get_executor, 2 * threads
    finally:
        client.close()


def key_of(rig_file: Path) -> str | None:
    """The content of a rig file and of every log that it names; of the rig file alone where it can't be loaded."""
    from ..rigfile.load import load_rig

    try:
        logs = sorted({spec.file for spec in load_rig(rig_file).runs})
    except GainwrightError:
        logs = []  # the job itself says what is wrong, and an error is never final
    return content_key([rig_file, *logs], version("gainwright"))


def _todo(
    folders: dict[Path, Path], journal: Journal, with_report: bool, note: Callable[[Done], None]
) -> Iterator[Job]:
    for rig_file, folder in folders.items():
        key = key_of(rig_file) or f"no content: {rig_file}"
        finished = receipt(folder, key)
        if finished is not None:
            journal.adopt(key, finished.label, folder, finished.code, finished.status, finished.said)
            note(finished)
        else:
            yield Job(key, str(rig_file), rig_file, folder, with_report=with_report)


def _write(out: Path, ended: Sequence[Done], asked: int) -> None:
    from ..report.overview import overview_html

    listed = [{**asdict(done), "folder": str(done.folder)} for done in ended]
    summary = json.dumps({"asked": asked, "jobs": listed}, indent=1, ensure_ascii=False) + "\n"
    OutputFolder(out).write({SUMMARY: summary.encode(), OVERVIEW: overview_html(ended, asked, out).encode()})
