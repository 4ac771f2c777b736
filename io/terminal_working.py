"""The working behind a verdict, for a terminal: the magnitude condition factor by factor."""

from ..design.compensator import open_loop
from ..design.locus.condition import working
from .figures.words import number
from .outcome import Outcome
from .report import tables


def working_text(outcome: Outcome) -> str:
    """The vectors from the open loop's roots to the chosen pole, their lengths, and K = 1/|G_L| from them.

    Parameters
    ----------
    outcome : Outcome

    Returns
    -------
    str
        Lines within 100 columns; one line where there is no locus to show.
    """
    if outcome.fit is None or outcome.design is None:
        return "No working: nothing was designed."
    selection = outcome.design.selection
    found = working(open_loop(outcome.design.gains, outcome.fit.plant, outcome.rig.setting), selection.pole)
    table = tables.magnitude(found, selection.loop_gain_unit)
    lines = [
        f"Magnitude condition at the pole {tables.point(selection.pole)} 1/s",
        f"  {table.head[0]:<38}{table.head[1]:>20}{table.head[2]:>18}  {table.head[3]}",
    ]
    lines += [f"  {name:<38}{root:>20}{size:>18}  {how}".rstrip() for name, root, size, how in table.rows]
    lines.append(f"  angle condition met within {number(abs(selection.angle_residual_deg), 2)} deg")
    lines.append(f"  exact pole of the sampled loop {tables.point(selection.sampled_pole)} 1/s")
    tried = tables.tried(outcome.design)
    lines += ["", tried.caption, f"  {'controller':<12}{'slack':>8}  {'plants':>8}  binds"]
    lines += [f"  {name:<12}{slack:>8}  {share:>8}  {binds}".rstrip() for name, slack, share, binds in tried.rows]
    return "\n".join(lines)
