"""What a structure is: a formula with unit gain, the names of its parameters, and where their values may lie."""

from collections.abc import Callable
from dataclasses import dataclass

Polynomials = tuple[tuple[float, ...], tuple[float, ...]]


@dataclass(frozen=True)
class Shape:
    """One internal parameter of a structure, always positive, fitted by its logarithm.

    Attributes
    ----------
    name : str
    kind : {"time", "frequency", "ratio", "command"}
        time: from a fraction of a sample to the record's length; frequency: the same in rad/s; ratio: low to high;
        command: a share of what the command moves.
    low, high : float
        Bounds of a ratio.
    steps : int
        How many values the library of first guesses holds.
    """

    name: str
    kind: str
    low: float = 0.0
    high: float = 0.0
    steps: int = 16


@dataclass(frozen=True)
class Named:
    """One parameter as people know it; unit "s", "rad/s", "1", or "command" for the command's unit."""

    name: str
    unit: str


@dataclass(frozen=True)
class Structure:
    """One structure of the catalogue.

    Attributes
    ----------
    name : str
        In words.
    formula : str
        Of G(s) without its dead time.
    shapes : tuple of Shape
    polynomials : callable
        Shape values -> (numerator, denominator) with unit gain, highest power first, s in 1/s.
    named : tuple of Named
        Parameters for people, without gain and dead time.
    values : callable
        Shape values -> values of `named`, in order.
    integrators : int
    friction : bool
        The last two shapes are dry frictions, forward and backward, that the command must overcome.
    zero : bool
        The numerator is Tz s + 1 in place of 1. The zero time Tz may have either sign, so it is no shape: K Tz enters
        the response linearly, as K does, and is solved for with it.
    further : bool
        Fitted only where the others leave something of what the command does unexplained.
    beside : str
        Name of the structure from whose fit it starts, a mode being added to it; empty: it has its own first guesses.
    """

    name: str
    formula: str
    shapes: tuple[Shape, ...]
    polynomials: Callable[[tuple[float, ...]], Polynomials]
    named: tuple[Named, ...]
    values: Callable[[tuple[float, ...]], tuple[float, ...]]
    integrators: int = 0
    friction: bool = False
    zero: bool = False
    further: bool = False
    beside: str = ""

    @property
    def parameters(self) -> tuple[Named, ...]:
        """All parameters for people but gain and dead time, the zero time last."""
        return (*self.named, Named("zero time", "s")) if self.zero else self.named
