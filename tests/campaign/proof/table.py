"""Counts with their 95 % intervals, one line a failure."""

from collections import Counter
from math import sqrt

from .job import Finished

VERDICTS = ("released and good", "released and bad", "held but achievable", "rightly held")


def wilson(hits: int, of: int, z: float = 1.959964) -> tuple[float, float]:
    """Wilson's 95 % interval of a share (Wilson, J. Am. Stat. Assoc. 22 (1927) 209-212; formula from memory)."""
    if of == 0:
        return 0.0, 1.0
    share = hits / of
    middle = share + z * z / (2 * of)
    half = z * sqrt(share * (1 - share) / of + z * z / (4 * of * of))
    return max((middle - half) / (1 + z * z / of), 0.0), min((middle + half) / (1 + z * z / of), 1.0)


def share(hits: int, of: int) -> str:
    """Hits of all, per cent, interval."""
    low, high = wilson(hits, of)
    return f"{hits}/{of} = {100 * hits / of:.0f} % ({100 * low:.0f} to {100 * high:.0f})" if of else "none"


def summary(jobs: list[Finished], kept_back: list[Finished]) -> str:
    """The table as text."""
    count = Counter(job.verdict for job in jobs)
    released = count["released and good"] + count["released and bad"]
    possible = released + count["held but achievable"]
    wrong = sum(job.verdict == "wrongly released" for job in kept_back)
    faults = [job for job in [*jobs, *kept_back] if job.verdict.startswith("fault")]
    lines = [
        f"right among those released   {share(count['released and good'], released)}",
        f"released among all           {share(released, len(jobs))}",
        f"released among achievable    {share(released, possible)}",
        f"must be held, but released   {share(wrong, len(kept_back))}",
        f"faults                       {len(faults)}",
        "",
        f"{'family':22}" + "".join(f"{name:>21}" for name in VERDICTS) + f"{'fault':>7}{'s a job':>9}",
    ]
    for family in dict.fromkeys(job.family for job in jobs):
        own = [job for job in jobs if job.family == family]
        each = Counter(job.verdict for job in own)
        row = "".join(f"{each[name]:>21}" for name in VERDICTS)
        fault = sum(job.verdict.startswith("fault") for job in own)
        lines.append(f"{family:22}{row}{fault:>7}{sum(job.seconds for job in own) / len(own):>9.1f}")
    row = "".join(f"{count[name]:>21}" for name in VERDICTS)
    lines.append(f"{'all':22}{row}{sum(j.verdict.startswith('fault') for j in jobs):>7}")
    if jobs:
        lines[-1] += f"{sum(job.seconds for job in jobs) / len(jobs):>9.1f}"
    return "\n".join(lines)


def line(job: Finished) -> str:
    """One job in a line; for what went wrong, why."""
    head = f"{job.index:4d} {job.kind or job.family:24} {job.status:9} {job.verdict:20} {job.seconds:5.1f} s"
    parts = [head]
    if job.missed and job.verdict in ("released and bad", "held but achievable"):
        broken = ", ".join(f"{name} by {100 * over:.3g} %" for name, over in job.missed.items())
        parts.append(("breaks " if job.status == "released" else "candidate breaks ") + broken)
    if job.verdict == "held but achievable" and not job.missed and job.true:
        parts.append("candidate breaks nothing")
    if job.verdict not in ("released and good",) and job.reasons:
        parts.append("; ".join(reason.splitlines()[0] if reason else "" for reason in job.reasons)[:400])
    return " | ".join(parts)
