"""The only place that rounds: a number at full precision becomes the text that a reader sees.

Every function returns plain text for console and HTML alike.  A figure that
does not exist (None, NaN) is :data:`NONE`; a negative number has a true minus
sign; a power of ten is written out (``1.2·10⁻⁵``).
"""

from __future__ import annotations

import math
from collections.abc import Iterable

NONE = "–"
MINUS = "−"
INFINITY = "∞"

MAX_DECIMALS = 8
_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
# Decimal text beyond these magnitudes is hard to read; powers of ten take over.
_SMALLEST_PLAIN, _LARGEST_PLAIN = 1e-4, 1e7


def fixed(value: float | None, decimals: int) -> str:
    """Return a number with a fixed count of decimals; never ``−0.00``.

    Examples
    --------
    >>> fixed(-1.005, 1), fixed(-0.001, 2), fixed(float("nan"), 2)
    ('−1.0', '0.00', '–')
    """
    if value is None or math.isnan(value):
        return NONE
    if math.isinf(value):
        return INFINITY if value > 0 else MINUS + INFINITY
    text = f"{value:.{decimals}f}"
    if text.startswith("-"):
        text = text[1:] if not float(text) else MINUS + text[1:]
    return text


def significant(value: float | None, digits: int = 4) -> str:
    """Return a number with ``digits`` significant digits, trailing zeros dropped.

    Examples
    --------
    >>> significant(1234.56), significant(0.25), significant(2.1e11), significant(3.2e-6, 2)
    ('1235', '0.25', '2.1·10¹¹', '3.2·10⁻⁶')
    """
    if value is None or not math.isfinite(value):
        return fixed(value, 0)
    if value == 0.0:
        return "0"
    rounded = float(f"{value:.{digits - 1}e}")
    if _SMALLEST_PLAIN <= abs(rounded) < _LARGEST_PLAIN:
        decimals = max(0, digits - 1 - _magnitude(rounded))
        return _stripped(fixed(rounded, decimals))
    return power_of_ten(value, digits)


def power_of_ten(value: float, digits: int = 2) -> str:
    """Return a number as mantissa and power of ten, for example ``1.2·10⁻⁵``."""
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    return _power(f"{_stripped(mantissa)}e{exponent}")


def _power(text: str) -> str:
    mantissa, exponent = text.split("e")
    return f"{mantissa.replace('-', MINUS)}·10{str(int(exponent)).translate(_SUPERSCRIPTS)}"


def beta(value: float | None, decimals: int = 2) -> str:
    """Return a reliability index: two decimals, three where small differences matter."""
    return fixed(value, decimals)


def probability(value: float | None) -> str:
    """Return a probability with two significant digits, as a power of ten below 0.001.

    Examples
    --------
    >>> probability(1.23e-5), probability(0.0316), probability(0.0)
    ('1.2·10⁻⁵', '0.032', '0')
    """
    if value is None or not math.isfinite(value):
        return NONE
    if value == 0.0:
        return "0"
    if abs(value) < 0.001:
        return _power(f"{value:.1e}")
    return significant(value, 2)


def share(value: float | None, decimals: int = 1) -> str:
    """Return a fraction of one in percent, for example ``12.5 %``."""
    text = fixed(None if value is None else 100.0 * value, decimals)
    return text if text == NONE else f"{text} %"


def change(ratio: float | None, decimals: int = 1) -> str:
    """Return a ratio new/old as a change in percent with its sign.

    Examples
    --------
    >>> change(1.067), change(0.9), change(1.0)
    ('+6.7 %', '−10.0 %', '0.0 %')
    """
    if ratio is None or not math.isfinite(ratio):
        return NONE
    text = fixed(100.0 * (ratio - 1.0), decimals)
    return f"{text if text.startswith(MINUS) or not float(text) else '+' + text} %"


def factor(value: float | None, step: float | None) -> str:
    """Return a factor with the decimals of its step, more where it has more, four at most.

    Examples
    --------
    >>> factor(1.5, 0.05), factor(1.325, 0.05), factor(1.0, None)
    ('1.50', '1.325', '1.00')
    """
    if value is None or not math.isfinite(value):
        return NONE
    least = max(2 if step is None else decimals_of(step, 4), 1)
    return fixed(value, max(least, decimals_of(value, 4)))


def optimum(value: float | None, step: float | None) -> str:
    """Return an unrounded factor: one decimal more than its step, at least three."""
    return fixed(value, max(3, decimals_of(step, 5) + 1 if step is not None else 3))


def decimals_of(value: float, most: int) -> int:
    """Return how many decimals a number needs, ``most`` at most.

    Examples
    --------
    >>> decimals_of(0.05, 4), decimals_of(0.025, 4), decimals_of(3.0, 4), decimals_of(1 / 3, 4)
    (2, 3, 0, 4)
    """
    for decimals in range(most):
        if math.isclose(round(value, decimals), value, rel_tol=1e-9, abs_tol=1e-12):
            return decimals
    return most


def column(values: Iterable[float | None], digits: int = 4) -> list[str]:
    """Return the numbers of a column with the same count of decimals, so that they align.

    The largest number keeps ``digits`` significant digits and the smallest at
    least two, but no more decimals are written than the numbers have.  A column
    that spans more than six decades is written number by number.
    """
    numbers = [None if v is None else float(v) for v in values]
    sizes = [abs(v) for v in numbers if v is not None and math.isfinite(v) and v != 0.0]
    if not sizes:
        return [fixed(v, 0) for v in numbers]
    largest, smallest = max(sizes), min(sizes)
    wide = largest / smallest > 1e6
    if wide or largest >= _LARGEST_PLAIN or largest < _SMALLEST_PLAIN:
        return [significant(v, digits) for v in numbers]
    most = max(digits - 1 - _magnitude(largest), min(digits, 2) - 1 - _magnitude(smallest))
    most = min(max(most, 0), MAX_DECIMALS)
    decimals = max((decimals_of(v, most) for v in numbers if v is not None and math.isfinite(v)), default=0)
    return [fixed(v, decimals) for v in numbers]


def span(values: Iterable[float], digits: int = 4) -> str:
    """Return one number, or ``smallest … largest`` where they differ; those that do not exist are left out."""
    given = [float(v) for v in values]
    finite = [v for v in given if math.isfinite(v)]
    if not finite:
        return significant(given[0], digits) if given else NONE
    low, high = significant(min(finite), digits), significant(max(finite), digits)
    return low if low == high else f"{low} … {high}"


def years(value: float) -> str:
    """Return a period in words: ``1 year``, ``50 years``."""
    return "1 year" if value == 1.0 else f"{significant(value, 6)} years"


def count(number: int, one: str, many: str | None = None) -> str:
    """Return a count with its noun: ``1 doubt``, ``96 situations``, ``12 000 rows``."""
    return f"{whole(number)} {one if number == 1 else many or one + 's'}"


def whole(number: int) -> str:
    """Return a whole number; from five digits on with a narrow space between thousands."""
    return f"{number:,}".replace(",", "\u202f") if abs(number) >= 10_000 else str(number)


def _magnitude(value: float) -> int:
    """Return the power of ten of the leading digit."""
    return math.floor(math.log10(abs(value)) + 1e-12)


def _stripped(text: str) -> str:
    return text.rstrip("0").rstrip(".") if "." in text else text
