"""The rig file's shape: which tables and keys there are and what kind of value each takes. Units come later."""

from datetime import date
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from ...design.requirements import StructureName


def _quantity(value: Any) -> Any:
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        raise ValueError("a quantity is a text with its unit")
    return value


def _number(value: Any) -> Any:
    if isinstance(value, str):
        raise ValueError("this is a bare number, without quotes and unit")
    return value


def _date(value: Any) -> Any:
    return value.isoformat() if isinstance(value, date) else value


def _not_limited(value: Any) -> Any:
    return {"lowest": value, "highest": value} if value == "not limited" else value


def _rate_not_limited(value: Any) -> Any:
    return {"highest": value} if value == "not limited" else value


def _absent(value: Any) -> Any:
    return {} if value is False else value


Text = Annotated[str, BeforeValidator(_quantity)]
Number = Annotated[float, BeforeValidator(_number), Field(allow_inf_nan=False)]
TimeText = Annotated[Text, Field(examples=["5 ms"])]


class Part(BaseModel):
    """Any table of the file. `guessed = true` marks one that a person has not confirmed yet."""

    model_config = ConfigDict(extra="forbid", strict=True, populate_by_name=False)

    guessed: bool = False


class RigName(Part):
    """[rig]"""

    name: str = Field(examples=["flume paddle"])


class OperatingPoint(Part):
    """[operating_point]"""

    command: Text | None = Field(default=None, examples=["0 V"])
    response: Text | None = Field(default=None, examples=["120 mm"])


class Log(Part):
    """[log]"""

    separator: str | None = Field(default=None, examples=[";"])
    decimal: Literal[".", ","] | None = None
    encoding: str | None = Field(default=None, examples=["cp1252"])
    header_row: int | None = Field(default=None, ge=0, examples=[1])
    first_row: int | None = Field(default=None, ge=1, examples=[2])
    not_a_number: list[str] = Field(default=[], examples=[["OL"]])


class Range(Part):
    """Lowest and highest reading."""

    lowest: Text | None = Field(default=None, examples=["0 mm"])
    highest: Text | None = Field(default=None, examples=["300 mm"])


class SignalPart(Part):
    """One signal of a log."""

    source: str | None = Field(default=None, examples=["time_s"])
    unit: str | None = Field(default=None, examples=["mm"])
    sample_rate: Text | None = Field(default=None, examples=["1 kHz"])
    scale: Number = Field(default=1.0, examples=[0.5])
    offset: Number = Field(default=0.0, examples=[0.0])
    lost_as: list[Number] = Field(default=[], examples=[[0.0]])
    range: Range | None = None


class Signals(Part):
    """[signals]"""

    time: SignalPart
    command: SignalPart
    response: SignalPart
    setpoint: SignalPart | None = None


class RunSignals(Part):
    """[runs.signals]: what differs in this run; `setpoint = false` and `command = false` read as an empty table."""

    time: SignalPart | None = None
    command: Annotated[SignalPart | None, BeforeValidator(_absent)] = Field(default=None, examples=[False])
    response: SignalPart | None = None
    setpoint: Annotated[SignalPart | None, BeforeValidator(_absent)] = Field(default=None, examples=[False])


class Before(Part):
    """Steady values before the log began."""

    command: Text = Field(examples=["6 V"])


class Current(Part):
    """The gains that are in the controller now."""

    proportional: Text | None = Field(default=None, examples=["0.4 V/mm"])
    integral: Text | None = Field(default=None, examples=["2 V/(mm s)"])
    derivative: Text | None = Field(default=None, examples=["0 V s/mm"])
    derivative_filter_time: TimeText | None = None
    update_interval: TimeText | None = None
    derivative_on: Literal["response", "error"] = "response"
    setpoint_weight: Number = Field(default=1.0, examples=[1.0])


class RunPart(Part):
    """[[runs]]"""

    file: str = Field(examples=["run_1.csv"])
    use: Literal["fit", "held-out"] = Field(examples=["fit", "held-out"])
    loop: Literal["open", "closed"] = "open"
    excitation: Literal["step", "sweep", "random", "frequency-table", "auto"] = "auto"
    from_: TimeText | None = Field(default=None, alias="from", examples=["0 s"])
    to: TimeText | None = Field(default=None, examples=["40 s"])
    between_samples: Literal["held", "interpolated", "auto"] = "auto"
    before: Before | None = None
    taken: Annotated[str, BeforeValidator(_date)] | None = Field(default=None, examples=["2026-11-03"])
    group: str | None = Field(default=None, examples=["/run_7"])
    signals: RunSignals | None = None
    current: Current | None = None
    frequency: SignalPart | None = None
    magnitude: SignalPart | None = None
    phase: SignalPart | None = None
    coherence: SignalPart | None = None
    magnitude_error: SignalPart | None = None
    phase_error: SignalPart | None = None


class Controller(Part):
    """[controller]; without `update_interval` it is continuous, which only a [plant] allows."""

    update_interval: TimeText | None = None
    computation_delay: Text = Field(default="0 s", examples=["1 ms"])
    structures: list[StructureName] | None = Field(default=None, examples=[["P", "PI"]], min_length=1)
    response_filter_time: Text = Field(default="0 s", examples=["2 ms"])
    current: Current | None = None


class AtMost(Part):
    """An upper bound."""

    at_most: Text = Field(examples=["10 %"])


class AtMostTime(Part):
    """An upper bound on a time."""

    at_most: Text = Field(examples=["0.2 s"])


class Settling(AtMostTime):
    """settling_time"""

    band: Text = Field(default="2 %", examples=["2 %"])


class SteadyError(Part):
    """steady_state_error"""

    at_most: Text = Field(examples=["1 %", "0.1 mm"])


class RampError(Part):
    """ramp_error"""

    at_most: Text = Field(examples=["0.5 mm"])
    ramp: Text = Field(examples=["10 mm/s"])


class DisturbancePeak(Part):
    """disturbance_peak"""

    at_most: Text = Field(examples=["0.5 mm"])
    command_step: Text = Field(examples=["1 V"])


class DisturbanceRecovery(Part):
    """disturbance_recovery"""

    at_most: Text = Field(examples=["2 s"])
    command_step: Text = Field(examples=["1 V"])
    band: Text = Field(examples=["0.1 mm"])


class CommandNoise(Part):
    """command_noise"""

    at_most: Text = Field(examples=["0.2 V"])


class DampingRatio(Part):
    """damping_ratio"""

    at_least: Number = Field(examples=[0.6])


class GainMargin(Part):
    """gain_margin"""

    at_least: Text = Field(examples=["6 dB"])


class PhaseMargin(Part):
    """phase_margin"""

    at_least: Text = Field(examples=["45 deg"])


class PeakSensitivity(Part):
    """peak_sensitivity"""

    at_most: Number = Field(examples=[1.7])


class RequirementsPart(Part):
    """[requirements]"""

    test_step: Text | None = Field(default=None, examples=["20 mm"])
    test_step_from: Text | None = Field(default=None, examples=["120 mm"])
    both_directions: bool = False
    overshoot: AtMost | None = None
    settling_time: Settling | None = None
    rise_time: AtMostTime | None = None
    steady_state_error: SteadyError | None = None
    ramp_error: RampError | None = None
    disturbance_peak: DisturbancePeak | None = None
    disturbance_recovery: DisturbanceRecovery | None = None
    command_noise: CommandNoise | None = None
    damping_ratio: DampingRatio | None = None
    gain_margin: GainMargin | None = None
    phase_margin: PhaseMargin | None = None
    peak_sensitivity: PeakSensitivity | None = None
    confidence: Text = Field(default="95 %", examples=["95 %"])


class LevelLimit(Part):
    """Lowest and highest allowed reading; "not limited" is a possible value."""

    lowest: Text | None = Field(default=None, examples=["-10 V", "not limited"])
    highest: Text | None = Field(default=None, examples=["10 V", "not limited"])


class RateLimit(Part):
    """Highest allowed rate, a magnitude."""

    highest: Text = Field(examples=["200 V/s", "not limited"])


class LimitsPart(Part):
    """[limits]"""

    command: Annotated[LevelLimit, BeforeValidator(_not_limited)] = LevelLimit()
    command_rate: Annotated[RateLimit | None, BeforeValidator(_rate_not_limited)] = None
    response: Annotated[LevelLimit, BeforeValidator(_not_limited)] = LevelLimit()
    response_rate: Annotated[RateLimit | None, BeforeValidator(_rate_not_limited)] = None


class Tolerance(Part):
    """How far a given plant may be off."""

    gain: Text = Field(default="20 %", examples=["20 %"])
    dead_time: Text = Field(default="20 %", examples=["20 %"])
    poles: Text = Field(default="20 %", examples=["20 %"])


class PlantPart(Part):
    """[plant]"""

    numerator: list[Number] | None = Field(default=None, examples=[[10.0]])
    denominator: list[Number] | None = Field(default=None, examples=[[1.0, 3.0, 2.0, 0.0]])
    dead_time: Text | None = Field(default=None, examples=["0.1 s"])
    sheet: str | None = Field(default=None, examples=["earlier/gains.json"])
    tolerance: Tolerance = Tolerance()


def _without_time(content: dict[str, Any]) -> bool:
    """Whether no run is a log in time, but a plant or frequency tables stand in."""
    runs = content.get("runs")
    if not runs:
        return "plant" in content
    kinds = [run.get("excitation") if isinstance(run, dict) else None for run in runs] if isinstance(runs, list) else []
    return bool(kinds) and all(kind == "frequency-table" for kind in kinds)


class RigFile(Part):
    """The whole file."""

    rig: RigName
    operating_point: OperatingPoint = OperatingPoint()
    log: Log = Log()
    signals: Signals
    runs: list[RunPart] = Field(default=[], examples=["[[runs]] tables"])
    controller: Controller = Controller()
    requirements: RequirementsPart = RequirementsPart()
    limits: LimitsPart = LimitsPart()
    plant: PlantPart | None = None

    @model_validator(mode="before")
    @classmethod
    def _signals_of_a_given_plant(cls, content: Any) -> Any:
        """A given plant and frequency tables need no signals: the tables that are left out are empty."""
        if not isinstance(content, dict) or not _without_time(content):
            return content
        signals = content.get("signals", {})
        if not isinstance(signals, dict):
            return content
        return {**content, "signals": {"time": {}, "command": {}, "response": {}, **signals}}
