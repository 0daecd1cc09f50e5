"""The only place that rounds."""

import math
import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.report import numbers

NUMBERS = st.floats(min_value=-1e12, max_value=1e12, allow_nan=False).filter(
    lambda v: v == 0 or abs(v) > 1e-12
)
RAISED = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")


def read(text):
    """Return the number that a reader would take from a text."""
    plain = text.replace(numbers.MINUS, "-").replace("\u202f", "").removesuffix(" %")
    return float(re.sub(r"·10([⁻⁰-⁹¹²³]+)", lambda m: "e" + m[1].translate(RAISED), plain))


@given(NUMBERS, st.integers(0, 8))
def test_fixed_is_within_half_a_unit_and_has_its_decimals(value, decimals):
    text = numbers.fixed(value, decimals)
    assert abs(read(text) - value) <= 0.5 * 10.0**-decimals * (1 + 1e-9) + 1e-15 * abs(value)
    assert len(text.partition(".")[2]) == decimals
    assert "-" not in text
    assert not re.fullmatch(r"−0\.?0*", text)


@given(NUMBERS, st.integers(1, 8))
def test_significant_keeps_its_digits(value, digits):
    text = numbers.significant(value, digits)
    assert abs(read(text) - value) <= 0.5 * 10.0 ** (1 - digits) * abs(value) * (1 + 1e-9)
    mantissa = text.split("·")[0]
    assert not (("." in mantissa) and mantissa.endswith(("0", ".")))


@given(st.lists(NUMBERS, min_size=1, max_size=12), st.integers(2, 6))
def test_a_column_aligns_or_spans_many_decades(values, digits):
    texts = numbers.column(values, digits)
    decimals = {len(t.partition(".")[2]) for t in texts}
    assert len(decimals) == 1 or any("·10" in t for t in texts) or _decades(values) > 6
    for text, value in zip(texts, values, strict=True):
        # Two digits of every number are kept, as far as eight decimals go.
        assert abs(read(text) - value) <= max(0.05 * abs(value), 0.5 * 10.0**-numbers.MAX_DECIMALS) * (
            1 + 1e-9
        )


def _decades(values):
    sizes = [abs(v) for v in values if v]
    return math.log10(max(sizes) / min(sizes)) if sizes else 0.0


@given(st.floats(1e-300, 1.0))
def test_probabilities_keep_two_digits(value):
    text = numbers.probability(value)
    assert abs(read(text) - value) <= 0.05 * value * (1 + 1e-9)
    assert ("·10" in text) == (value < 0.001)


@given(st.floats(0.0, 100.0))
def test_a_change_has_a_sign_unless_it_is_nothing(ratio):
    text = numbers.change(ratio)
    percent = read(text.replace("+", ""))
    assert abs(percent - 100.0 * (ratio - 1.0)) <= 0.05 * (1 + 1e-9)
    assert text.startswith(numbers.MINUS if percent < 0 else "+" if percent > 0 else "0.0 %")


@given(st.floats(0.1, 5.0), st.sampled_from([0.05, 0.1, 0.025, 0.01, None]))
def test_a_factor_shows_at_least_the_decimals_of_its_step(value, step):
    text = numbers.factor(value, step)
    assert abs(read(text) - value) <= 0.5e-4 * (1 + 1e-9)
    if step is not None:
        on_lattice = round(value / step) * step
        assert math.isclose(read(numbers.factor(on_lattice, step)), on_lattice, rel_tol=1e-9)
        assert len(text.partition(".")[2]) >= numbers.decimals_of(step, 4)


@pytest.mark.parametrize(
    "function",
    [
        lambda v: numbers.fixed(v, 2), numbers.significant, numbers.probability, numbers.share, numbers.change,
        lambda v: numbers.factor(v, 0.05), lambda v: numbers.optimum(v, 0.05), numbers.beta,
        lambda v: numbers.column([v])[0], lambda v: numbers.span([v]),
    ],
)  # fmt: skip
def test_what_does_not_exist_is_a_dash(function):
    assert function(math.nan) == numbers.NONE


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (numbers.fixed(math.inf, 1), "∞"),
        (numbers.fixed(-math.inf, 1), "−∞"),
        (numbers.fixed(None, 1), "–"),
        (numbers.significant(9.9999e-5), "0.0001"),
        (numbers.significant(9_999_999.0, 3), "1·10⁷"),
        (numbers.significant(-0.0), "0"),
        (numbers.probability(3e-5), "3.0·10⁻⁵"),
        (numbers.probability(1.23e-5), "1.2·10⁻⁵"),
        (numbers.share(0.125), "12.5 %"),
        (numbers.share(None), "–"),
        (numbers.change(1.00001), "0.0 %"),
        (numbers.factor(1.5, 0.05), "1.50"),
        (numbers.factor(1.325, 0.05), "1.325"),
        (numbers.optimum(1.2345678, 0.05), "1.235"),
        (numbers.optimum(1.2345678, 0.001), "1.2346"),
        (numbers.span([1.0, 2.0, math.nan]), "1 … 2"),
        (numbers.span([1.00001, 1.00002]), "1"),
        (numbers.span([]), "–"),
        (numbers.years(1.0), "1 year"),
        (numbers.years(50.0), "50 years"),
        (numbers.count(1, "doubt"), "1 doubt"),
        (numbers.count(12_000, "row"), "12\u202f000 rows"),
        (numbers.whole(9999), "9999"),
        (", ".join(numbers.column([5.59, 6.1213, 10.0])), "5.59, 6.12, 10.00"),
        (", ".join(numbers.column([1.0, 2.0])), "1, 2"),
        (", ".join(numbers.column([0.0, math.nan])), "0, –"),
    ],
)
def test_examples(text, expected):
    assert text == expected
