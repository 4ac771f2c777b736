"""Headroom bars: how much of the way to each hardware limit the worst plausible plant uses."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .look import SMALL, TEXT, Role, colour, sheet, strip
from .words import number, plain, with_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LEFT, WIDE, ROW = 1.35, 3.05, 0.36


@dataclass(frozen=True)
class Headroom:
    """The way to one limit.

    Attributes
    ----------
    name : str
        "command highest", ...
    role : Role
        Whose colour the bar has.
    unit : str
    start : float
        Where the way begins: the operating reading, or 0 for a rate.
    worst : float or None
        The reading that comes nearest to the limit on any plausible plant; None: nothing was predicted.
    limit : float or None
        None: not given. Infinite: said to be not limited.
    """

    name: str
    role: Role
    unit: str
    start: float
    worst: float | None
    limit: float | None

    @property
    def used(self) -> float | None:
        """Share of the way that is used; above 1 the limit is passed; None where there is no finite way."""
        if self.limit is None or self.worst is None or abs(self.limit) == float("inf"):
            return None
        way = self.limit - self.start
        return (self.worst - self.start) / way if way != 0.0 else 1.0


def headroom_bars(rows: Sequence[Headroom]) -> "Figure":
    """Draw one bar a limit, from the operating point to the limit, filled as far as the worst plant goes.

    Parameters
    ----------
    rows : sequence of Headroom

    Returns
    -------
    Figure
    """
    tall = ROW * max(len(rows), 1)
    figure = sheet(tall + 0.55)
    axes = strip(figure, (LEFT, 0.3, WIDE, tall), frame=False)
    axes.set_xlim(0.0, 1.0)
    axes.set_ylim(len(rows) - 0.4, -0.6)
    for place, row in enumerate(rows):
        _name(axes, place, row)
        _bar(axes, place, row)
        _verdict(axes, place, row)
    _ends(axes)
    return figure


def _name(axes: "Axes", place: int, row: Headroom) -> None:
    axes.annotate(
        plain(row.name), (0.0, place), xycoords=("axes fraction", "data"), xytext=(-8, 0), textcoords="offset points",
        ha="right", va="center", fontsize=TEXT, color=colour("ink"), annotation_clip=False,
    )  # fmt: skip


def _bar(axes: "Axes", place: int, row: Headroom) -> None:
    used = row.used
    if used is None:
        axes.plot([0.0, 1.0], [place, place], color=colour("faint"), linewidth=0.8, linestyle=(0, (1, 3)))
        return
    axes.plot([0.0, 1.0], [place, place], color=colour("ink"), linewidth=0.7, zorder=1)
    filled = min(max(used, 0.0), 1.0)
    role: Role = "limit" if used > 1.0 else row.role
    passed = used > 1.0
    axes.barh(
        place, filled, height=0.44, facecolor="none" if passed else colour(role), edgecolor=colour(role), zorder=2,
        linewidth=0.8 if passed else 0.0, hatch="xxxx" if passed else None,
    )  # fmt: skip
    axes.plot([1.0, 1.0], [place - 0.36, place + 0.36], color=colour("limit"), linewidth=2.0, clip_on=False)
    axes.plot([0.0, 0.0], [place - 0.22, place + 0.22], color=colour("ink"), linewidth=0.8, clip_on=False)


def _verdict(axes: "Axes", place: int, row: Headroom) -> None:
    used = row.used
    if row.limit is None:
        text, role = "MISSING LIMIT", "limit"
    elif used is None:
        text, role = ("not limited" if row.worst is None or abs(row.limit) == float("inf") else "not predicted"), "ink"
    elif used > 1.0:
        text, role = f"PASSED: {_reach(row)}", "limit"
    else:
        left = number(100.0 * (1.0 - used), 2 if used < 0.9 else 1)
        text, role = f"{left} % left: {_reach(row)}", "ink"
    axes.annotate(
        plain(text), (1.0, place), xycoords=("axes fraction", "data"), xytext=(8, 0), textcoords="offset points",
        ha="left", va="center", fontsize=SMALL, color=colour("limit" if role == "limit" else "ink"),
        annotation_clip=False,
    )  # fmt: skip


def _reach(row: Headroom) -> str:
    return f"worst {number(row.worst)}, limit {with_unit(row.limit, row.unit)}"


def _ends(axes: "Axes") -> None:
    for place, side, text in ((0.0, "left", "operating point, or rest"), (1.0, "right", "limit")):
        axes.annotate(
            text, (place, 0.0), xycoords="axes fraction", xytext=(0, -4), textcoords="offset points", ha=side, va="top",
            fontsize=SMALL, color=colour("ink"), annotation_clip=False,
        )  # fmt: skip
