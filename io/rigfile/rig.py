"""The rig file as a value, everything already in the units of the logged signals and in seconds."""

from dataclasses import dataclass
from pathlib import Path

from ...design.gains import Gains
from ...design.requirements import ControllerSetting, Limits, Requirements
from ...ident.given import GivenPlant
from ...ident.run import Between, Excitation


@dataclass(frozen=True)
class LogDialect:
    """What the rig file says about the text of its logs, where the guess would be wrong; None: guess.

    first_row and header_row count lines of the file from 1.
    """

    separator: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    header_row: int | None = None
    first_row: int | None = None
    not_a_number: tuple[str, ...] = ()


@dataclass(frozen=True)
class Signal:
    """One signal of a log.

    Attributes
    ----------
    source : str or None
        CSV column or HDF5 dataset path; None for a time made from `sample_rate`.
    unit : str or None
        As written; None: the log states it.
    sample_rate : float or None, Hz
        Time only.
    scale, offset : float
        reading = scale * logged + offset, in `unit`.
    lost_as : tuple of float
        Logged values that stand for a lost sample.
    lowest, highest : float or None, in `unit`
        Range of the sensor, for clipping.
    """

    source: str | None
    unit: str | None = None
    sample_rate: float | None = None
    scale: float = 1.0
    offset: float = 0.0
    lost_as: tuple[float, ...] = ()
    lowest: float | None = None
    highest: float | None = None


@dataclass(frozen=True)
class InForce:
    """The gains that a controller had during a run.

    Attributes
    ----------
    gains : Gains
        In the units of the signals.
    update_interval : float, s
    derivative_on_error : bool
        The derivative sees setpoint - response; else minus the response.
    """

    gains: Gains
    update_interval: float
    derivative_on_error: bool = False


@dataclass(frozen=True)
class RunSpec:
    """One run to read: a file that exists, and how to read it.

    Attributes
    ----------
    file : Path
        Absolute.
    shown : str
        As people would name it, relative to the rig file.
    use : {"fit", "held-out"}
    signals : dict of role ("time", "command", "response", "setpoint") to Signal
        Overrides of this run already applied.
        A command that is not in the log is missing: the gains in force tell what it was.
    from_s, to_s : float or None, s
        Window, from the first sample, half-open.
    in_force : InForce or None
        The gains during this run, where they are stated.
    """

    file: Path
    shown: str
    use: str
    loop: str
    excitation: Excitation
    between_samples: Between
    signals: dict[str, Signal]
    from_s: float | None = None
    to_s: float | None = None
    command_before: float | None = None
    group: str | None = None
    taken: str | None = None
    in_force: InForce | None = None


@dataclass(frozen=True)
class Rig:
    """A whole rig file.

    Attributes
    ----------
    name : str
    file : Path
    sha256 : str
        Of the rig file's bytes.
    command_unit, response_unit : str
        As the rig file or the log writes them; every number below is in these and in seconds.
    operating_command, operating_response : float or None
        None: fitted.
    guessed : tuple of str
        Keys that still stand as `guessed = true`; they hold the job.
    given : GivenPlant or None
        The plant of the rig file, in place of fit runs.
    """

    name: str
    file: Path
    sha256: str
    command_unit: str
    response_unit: str
    signals: dict[str, Signal]
    runs: tuple[RunSpec, ...]
    dialect: LogDialect
    setting: ControllerSetting
    requirements: Requirements
    limits: Limits
    operating_command: float | None = None
    operating_response: float | None = None
    guessed: tuple[str, ...] = ()
    given: GivenPlant | None = None
