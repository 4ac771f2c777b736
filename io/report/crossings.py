"""The table of what else the locus offers on the lines through the chosen pole."""

from ...design.locus.condition import LocusError
from ...design.locus.loop import OpenLoop
from ...design.locus.offered import Offered, is_same, offered
from ..figures.words import number, with_unit
from .tables import Table, point


def crossings(loop: OpenLoop, chosen: complex, unit: str) -> Table | None:
    """Every crossing of the chosen pole's damping ray, natural-frequency circle and settling line, with its K.

    Parameters
    ----------
    chosen : complex, 1/s
    unit : str
        Of K.
    """
    try:
        lines = offered(loop, chosen)
    except LocusError:
        return None
    rows: list[tuple[str, ...]] = []
    own: list[int] = []
    for line in lines:
        for each in line.points:
            same = is_same(each, chosen)
            if same:
                own.append(len(rows))
            rows.append((_name(line), point(each.point), with_unit(each.loop_gain, unit, 6), "chosen" if same else ""))
    head = ("line through the chosen pole", "crossing (1/s)", "K there", "")
    return Table("Everything the locus offers on the same lines", head, tuple(rows), tuple(own)) if rows else None


def _name(line: Offered) -> str:
    unit = {"damping ratio": "", "natural frequency": "rad/s", "settling line": "1/s"}[line.kind]
    return f"{line.kind} {with_unit(line.at, unit, 4) if unit else number(line.at, 4)}"
