"""The gains in force during a run, and what a log without its command needs of them."""

from ...design.gains import Gains
from .messages import Problems
from .quantities import Quantities
from .rig import InForce, Signal
from .schema import Current, RigFile, RunPart


def build_in_force(
    key: str, part: Current, controller_interval: float | None, units: dict[str, str], problems: Problems
) -> InForce | None:
    """Gains in signal units; None where none is stated, or no update interval.

    Parameters
    ----------
    key : str
        Of the table in the rig file.
    controller_interval : float or None, s
        Of [controller], where the table states none.
    """
    numbers = Quantities(problems)
    gain = f"({units['command']})/({units['response']})"

    def read(name: str, unit: str) -> float:
        text = getattr(part, name)
        return 0.0 if text is None else numbers.difference(f"{key}.{name}", text, unit)

    gains = Gains(
        "PID",
        proportional=read("proportional", gain),
        integral=read("integral", f"{gain}/s"),
        derivative=read("derivative", f"{gain}*s"),
        filter_time=read("derivative_filter_time", "s"),
        setpoint_weight=part.setpoint_weight,
    )
    interval = controller_interval
    if part.update_interval is not None:
        interval = numbers.positive(f"{key}.update_interval", part.update_interval, "s")
    stated = {"proportional", "integral", "derivative"} & part.model_fields_set
    if not stated:
        problems.add(key, "no gain is stated", "none", 'such as proportional = "0.4 V/mm"')
    return InForce(gains, interval, part.derivative_on == "error") if interval and stated else None


def require_known_command(
    number: int, run: RunPart, shape: RigFile, signals: dict[str, Signal], in_force: InForce | None, problems: Problems
) -> None:
    """A log without its command needs the loop that made it: setpoint, gains, and where the command began."""
    if "command" in signals:
        return
    key = f"runs[{number}]"
    if run.loop != "closed":
        problems.add(f"{key}.loop", "a log without its command must be of a closed loop", '"open"', '"closed"')
    if "setpoint" not in signals:
        problems.add(f"{key}.signals.setpoint", "a log without its command needs its setpoint", "none", "a source")
    if in_force is None and run.current is None and shape.controller.current is None:
        problems.add(
            f"{key}.current",
            "a log without its command needs the gains that were in force",
            "none",
            '[runs.current] or [controller.current], such as proportional = "0.4 V/mm"',
        )
    if run.before is None and shape.operating_point.command is None:
        problems.add(
            f"{key}.before",
            "a log without its command does not tell where the command began",
            "nothing",
            'before = { command = "6 V" }, the steady command before the log, or operating_point.command',
        )
