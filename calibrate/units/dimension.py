"""Physical dimensions: rational exponents of the SI base dimensions."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

BASE_NAMES = ("length", "mass", "time", "current", "temperature", "substance", "luminosity")
BASE_SYMBOLS = ("m", "kg", "s", "A", "K", "mol", "cd")
# The order in which factors are printed: a force reads kg·m/s², not m·kg/s².
PRINT_ORDER = (1, 0, 3, 4, 5, 6, 2)

SUPERSCRIPTS = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


@dataclass(frozen=True, slots=True)
class Dimension:
    """A physical dimension: rational exponents of the seven SI base dimensions.

    Parameters
    ----------
    exponents : tuple of fractions.Fraction
        Of length, mass, time, current, temperature, substance, luminosity.
    anything : bool
        True only for :data:`ANY_DIMENSION`, the dimension of a literal 0,
        which agrees with every other and stays what it is in products.

    Notes
    -----
    Angles are dimensionless.  ``str`` gives words ("mass·length/time²").
    """

    exponents: tuple[Fraction, ...] = (Fraction(0),) * 7
    anything: bool = False

    @property
    def is_dimensionless(self) -> bool:
        """Whether a plain number has this dimension."""
        return not any(self.exponents)

    def __mul__(self, other: Dimension) -> Dimension:
        if self.anything or other.anything:
            return ANY_DIMENSION
        return Dimension(tuple(a + b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __truediv__(self, other: Dimension) -> Dimension:
        return self * other**-1

    def __pow__(self, power: Fraction | int) -> Dimension:
        return self if self.anything else Dimension(tuple(a * power for a in self.exponents))

    def agrees(self, other: Dimension) -> bool:
        """Whether the two may be added or compared."""
        return self.anything or other.anything or self == other

    def __str__(self) -> str:
        if self.anything:
            return "any dimension"
        return self._compose(BASE_NAMES) or "dimensionless"

    def describe(self) -> str:
        """Return words for a message: ``a force (kg·m/s²)``, ``dimensionless``, ``in kg/s``."""
        if self.anything or self.is_dimensionless:
            return str(self)
        units = self._compose(BASE_SYMBOLS)
        name = _NAMED.get(self.exponents)
        return f"{name} ({units})" if name else f"in {units}"

    def _compose(self, names: tuple[str, ...]) -> str:
        above = [(names[i], self.exponents[i]) for i in PRINT_ORDER if self.exponents[i] > 0]
        below = [(names[i], -self.exponents[i]) for i in PRINT_ORDER if self.exponents[i] < 0]
        if not above and not below:
            return ""
        top = "·".join(n + _raised(e) for n, e in above) or "1"
        return top + "".join("/" + n + _raised(e) for n, e in below)


def _raised(power: Fraction) -> str:
    if power == 1:
        return ""
    if power.denominator == 1:
        return str(power.numerator).translate(SUPERSCRIPTS)
    return f"^{float(power):.6g}"


def _dimension(length: float = 0, mass: float = 0, time: float = 0, temperature: float = 0) -> Dimension:
    zero = Fraction(0)
    return Dimension(
        (Fraction(length), Fraction(mass), Fraction(time), zero, Fraction(temperature), zero, zero)
    )


DIMENSIONLESS = Dimension()
ANY_DIMENSION = Dimension(anything=True)

_NAMED = {
    _dimension(1).exponents: "a length",
    _dimension(2).exponents: "an area",
    _dimension(3).exponents: "a volume",
    _dimension(4).exponents: "a second moment of area",
    _dimension(0, 1).exponents: "a mass",
    _dimension(0, 0, 1).exponents: "a time",
    _dimension(0, 0, -1).exponents: "a frequency or rate",
    _dimension(0, 0, 0, 1).exponents: "a temperature",
    _dimension(1, 0, -1).exponents: "a velocity",
    _dimension(1, 0, -2).exponents: "an acceleration",
    _dimension(1, 1, -2).exponents: "a force",
    _dimension(0, 1, -2).exponents: "a force per length",
    _dimension(-1, 1, -2).exponents: "a stress or pressure",
    _dimension(-2, 1, -2).exponents: "a force per volume",
    _dimension(2, 1, -2).exponents: "a moment or energy",
    _dimension(2, 1, -3).exponents: "a power",
    _dimension(-3, 1).exponents: "a density",
}
