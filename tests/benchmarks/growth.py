"""How cost grows with samples, runs, plants in the ensemble and jobs: log-log slopes, 1 where it is proportional."""

from fits import ours
from gainwright.ident.identify import identify
from gainwright.io.job import process_rig
from jobs import SAMPLES
from loops import ensemble
from measure import Line, once, seconds, slope
from records import record


def growth_lines(quick):
    """A fit and `identify` against samples, `identify` against runs, the ensemble against plants, jobs."""
    sizes = (2_000, 20_000) if quick else (10_000, 100_000, 1_000_000, 10_000_000)
    runs = [record("resonance", n) for n in sizes]
    yield _line(
        "fit of one structure against samples", sizes, [seconds(lambda r=r: ours(r, "resonance"), 1) for r in runs]
    )
    sizes = (1_000, 4_000) if quick else (1_000, 10_000, 100_000, 1_000_000)
    runs = [record("resonance", n, 0.9) for n in sizes]
    yield _line("identify against samples", sizes, [once(lambda r=r: identify([r])) for r in runs])
    counts = (1, 4) if quick else (1, 10, 100)
    sets = [[record("lag", 500, 0.5, seed) for seed in range(count)] for count in counts]
    yield _line("identify against runs of 500 samples", counts, [once(lambda s=s: identify(s)) for s in sets])
    counts = (100, 400) if quick else (100, 1_000, 10_000)
    calls = [ensemble(count, 500)[0] for count in counts]
    yield _line("sampled ensemble against plants", counts, [seconds(call, 3) for call in calls])
    if quick:
        return
    counts = (1, 5, 10)
    rig = SAMPLES / "mirror" / "rig.toml"
    yield _line("jobs", counts, [once(lambda c=c: [process_rig(rig) for _ in range(c)]) for c in counts])


def _line(what, sizes, times):
    beside = (
        ("slope", slope(sizes, times)),
        *((f"ms at {size:,}", 1e3 * t) for size, t in zip(sizes, times, strict=True)),
    )
    return Line("growth", what, times[-1], beside)
