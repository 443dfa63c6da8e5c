"""One line of evidence: a number from outside, ours, how far they may lie apart, and the verdict."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Bound = Literal["within", "at most", "at least"]
Verdict = Literal["within", "outside", "no comparison"]

MEMORY = "quoted from memory"
PRACTICE = "common practice, no source"
CLOSED_FORM = "closed form"


@dataclass(frozen=True)
class Row:
    """A number from outside beside ours.

    Attributes
    ----------
    subject : str
        Heading under which the line stands.
    what : str
        What is compared.
    source : str
        Where the number from outside is printed, with locator and with how it came here.
    expected : float or None
        The number from outside; None where there is none to compare with. [unit]
    got : float or None
        Ours; None where the model has no such number. [unit]
    tolerance : float or None
        How far they may lie apart; None where a comparison would mean nothing. [unit]
    unit : str
        Unit of all three.
    note : str
        What a reader must know to judge the line.
    bound : {'within', 'at most', 'at least'}
        Whether `expected` is a value, a ceiling or a floor.

    Examples
    --------
    >>> Row("a", "b", "closed form", 1.0, 1.1, 0.2, "m").verdict
    'within'
    >>> Row("a", "b", "closed form", 1.0, 1.1, 0.0, "m", bound="at most").verdict
    'outside'
    >>> Row("a", "b", "closed form", 1.0, None, None, "m").verdict
    'no comparison'
    """

    subject: str
    what: str
    source: str
    expected: float | None
    got: float | None
    tolerance: float | None
    unit: str
    note: str = ""
    bound: Bound = "within"

    @property
    def verdict(self) -> Verdict:
        """'within', 'outside', or 'no comparison' where a number or the tolerance is missing."""
        if self.expected is None or self.got is None or self.tolerance is None:
            return "no comparison"
        excess = self.got - self.expected
        if self.bound == "within":
            excess = abs(excess)
        elif self.bound == "at least":
            excess = -excess
        return "within" if excess <= self.tolerance else "outside"


def between(low: float, high: float) -> tuple[float, float]:
    """Middle and half width of a range, for `Row.expected` and `Row.tolerance`.

    Examples
    --------
    >>> between(2.0, 6.0)
    (4.0, 2.0)
    """
    return (low + high) / 2.0, (high - low) / 2.0
