"""Pairs counted: false alarms, missed changes, each with its one-sided 95 % bound; and what failed, in lines."""

from collections import Counter
from collections.abc import Sequence

from pairing import Pair, RigPairs
from scipy.stats import beta

VERDICTS = ("agrees", "not comparable", "disagrees", "refused", "fault")
SORTS = ("unchanged", "harmless", "harmful", "already broken")
WRONG = {"unchanged": "disagrees", "harmful": "agrees"}


def at_most(hits: int, of: int, confidence: float = 0.95) -> float:
    """One-sided upper bound of a share (Clopper & Pearson, Biometrika 26 (1934) 404-413; formula from memory).

    Examples
    --------
    >>> round(at_most(0, 299), 5)  # 1 - 0.05^(1/299)
    0.00997
    """
    return 1.0 if hits >= of else float(beta.ppf(confidence, hits + 1, of - hits))


def share(hits: int, of: int) -> str:
    """Hits of all, per cent, bound."""
    return f"{hits} of {of} = {100 * hits / of:.1f} % (at most {100 * at_most(hits, of):.1f} %)" if of else "none"


def summary(rigs: Sequence[RigPairs]) -> str:
    """The table as text. Powered: closing did not call the run too weak, and its record was not refused."""
    pairs = [pair for rig in rigs for pair in rig.pairs]
    count = Counter((pair.sort, pair.verdict) for pair in pairs)
    whole = Counter(pair.sort for pair in pairs)
    powered = {sort: count[sort, "agrees"] + count[sort, "disagrees"] for sort in SORTS}
    alarmed = {(p.seed, p.index) for p in pairs if (p.sort, p.verdict) == ("unchanged", "disagrees")}
    quiet = {(p.seed, p.index) for p in pairs if p.sort == "unchanged"}
    lines = [
        f"pairs with power                       {powered['unchanged'] + powered['harmful']}"
        f" (unchanged {powered['unchanged']}, harmful {powered['harmful']})",
        f"false disagrees, of powered unchanged  {share(count['unchanged', 'disagrees'], powered['unchanged'])}",
        f"missed, of powered harmful             {share(count['harmful', 'agrees'], powered['harmful'])}",
        f"rigs with a false disagrees            {share(len(alarmed), len(quiet))}",
        f"not comparable, of all unchanged       {share(count['unchanged', 'not comparable'], whole['unchanged'])}",
        f"rigs without gains that could be released  {sum(not rig.pairs for rig in rigs)} of {len(rigs)}",
        "",
        f"{'':16}" + "".join(f"{name:>16}" for name in VERDICTS),
    ]
    lines += [f"{sort:16}" + "".join(f"{count[sort, name]:>16}" for name in VERDICTS) for sort in SORTS]
    lines += ["", f"{'harmful by':16}" + "".join(f"{name:>16}" for name in VERDICTS)]
    for kind in dict.fromkeys(pair.kind for pair in pairs if pair.sort == "harmful"):
        each = Counter(pair.verdict for pair in pairs if pair.sort == "harmful" and pair.kind == kind)
        lines.append(f"{kind:16}" + "".join(f"{each[name]:>16}" for name in VERDICTS))
    return "\n".join(lines)


def line(rig: RigPairs) -> str:
    """One rig: its counts, and a line for each wrong answer."""
    count = Counter(f"{pair.sort}: {pair.verdict}" for pair in rig.pairs)
    told = ", ".join(f"{number} {what}" for what, number in count.items()) or rig.without[:200]
    head = f"{rig.index:4d} {rig.family:22} {rig.seconds:6.1f} s CPU | {told}"
    return "\n".join([head, *(_wrong(p) for p in rig.pairs if WRONG.get(p.sort) == p.verdict or p.verdict == "fault")])


def _wrong(pair: Pair) -> str:
    broken = ", ".join(f"{name} by {100 * over:.3g} %" for name, over in pair.after.items())
    return f"       WRONG {pair.kind} {pair.size} {pair.verdict} | breaks {broken or 'nothing'} | {pair.why[-400:]}"
