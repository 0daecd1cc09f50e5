"""Weakest links: closed forms of sizes and of stress integrals, and the direct simulation of a chain."""

import numpy as np
import pytest
from scipy import special

from calibrate.actions.size_effect import size_effect, size_factor, stress_integral
from calibrate.distributions import distribution
from calibrate.errors import InputError

SHAPES = np.array([1.5, 4.0, 12.0, 60.0])
SQUARE = ((0.0, 1.0), (0.0, 1.0))

# stress, bounds, share of the size in closed form
FIELDS = {
    "even": (lambda x: np.ones_like(x), ((0.0, 1.0),), lambda m: np.ones_like(m)),
    "even bending": (lambda y: 2.0 * y - 1.0, ((0.0, 1.0),), lambda m: 0.5 / (m + 1.0)),
    "three-point bending": (
        lambda x, y: (2.0 * y - 1.0) * (1.0 - np.abs(2.0 * x - 1.0)),
        SQUARE,
        lambda m: 0.5 / (m + 1.0) ** 2,
    ),
    "cantilever, load at its end": (lambda x, y: x * y, ((0.0, 1.0), (-1.0, 1.0)), lambda m: 1.0 / (m + 1.0) ** 2),
    "cantilever, even load": (
        lambda x, y: x * x * (2.0 * y - 1.0), SQUARE, lambda m: 0.5 / ((2.0 * m + 1.0) * (m + 1.0)),
    ),
    "simple beam, even load": (
        lambda x, y: 4.0 * x * (1.0 - x) * (2.0 * y - 1.0),
        SQUARE,
        lambda m: 0.5 / (m + 1.0) * 4.0**m * special.beta(m + 1.0, m + 1.0),
    ),
    "tension and bending": (
        lambda y: 0.25 + 0.75 * (2.0 * y - 1.0), ((0.0, 1.0),), lambda m: 1.0 / (1.5 * (m + 1.0)),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FIELDS)
def test_stress_integrals_in_closed_form(name):
    stress, bounds, share = FIELDS[name]
    np.testing.assert_allclose(stress_integral(stress, SHAPES, bounds), share(SHAPES), rtol=1e-8)
    single = stress_integral(stress, 4.0, bounds)
    assert single.shape == ()
    assert float(single) == pytest.approx(float(share(np.array(4.0))), rel=1e-8)


def test_a_round_bar_in_bending_in_polar_coordinates():
    """Volume integral of (r sin t)**m r over the half in tension: B((m + 1)/2, 1/2)/(m + 2)."""
    found = stress_integral(
        lambda r, t: r * np.sin(t), SHAPES, ((0.0, 1.0), (0.0, 2.0 * np.pi)), element=lambda r, t: r
    )
    np.testing.assert_allclose(found, special.beta(0.5 * (SHAPES + 1.0), 0.5) / (SHAPES + 2.0), rtol=1e-8)


def test_a_narrow_peak_whose_place_and_edges_are_given():
    def peak(x):
        return np.exp(-np.abs(x - 0.613) / 1e-4)

    assert float(stress_integral(peak, 10.0, points=[[0.613], [0.612], [0.614]])) == pytest.approx(
        2e-5, rel=1e-8
    )


def test_three_dimensions_multiply():
    found = stress_integral(lambda x, y, z: x * y * z, 3.0, ((0.0, 1.0), (0.0, 1.0), (0.0, 2.0)))
    assert float(found) == pytest.approx((1 / 4) * (1 / 4) * (2**4 / 4), rel=1e-8)


# Strength of the part ------------------------------


@pytest.mark.parametrize("ratio", [0.1, 1.0, 8.0, 1e4])
def test_a_weibull_strength_falls_by_the_ratio_of_sizes(ratio):
    specimens = distribution("weibull", mean=42.0, cov=0.14)
    part = size_effect(specimens, ratio)
    shape = specimens.parameters["shape"]
    for p in (1e-6, 0.05, 0.5, 0.999):
        quotient = part.ppf(p) / specimens.ppf(p)
        assert float(quotient) == pytest.approx(float(ratio ** (-1.0 / shape)), rel=1e-12)
        assert float(quotient) == pytest.approx(float(size_factor(shape, ratio)), rel=1e-12)
    assert float(part.cov) == pytest.approx(0.14, rel=1e-10)


@pytest.mark.parametrize("name", ["lognormal", "normal", "weibull", "gamma"])
def test_any_strength_is_that_of_the_weakest_of_its_elements(name):
    element = distribution(name, mean=30.0, cov=0.15)
    part = size_effect(element, 12.0)
    draws = element.sample(np.random.default_rng(20), (40_000, 12)).min(axis=1)
    # Four standard errors of a mean and, for a nearly normal sample, of a standard deviation.
    assert draws.mean() == pytest.approx(float(part.mean), abs=4.0 * draws.std() / 200.0)
    assert draws.std() == pytest.approx(float(part.sd), rel=4.0 * 1.5 / np.sqrt(2.0 * 40_000))
    below = part.ppf(0.05)
    assert np.mean(draws < below) == pytest.approx(0.05, abs=4.0 * np.sqrt(0.05 * 0.95 / 40_000))


def test_bending_strength_from_tension_tests_by_a_chain_of_layers():
    """Simulate a beam of 200 layers, each a Weibull element under its own stress."""
    shape, layers, n = 6.0, 200, 20_000
    whole = distribution("weibull", scale=10.0, shape=shape)
    layer = size_effect(whole, 1.0 / layers)
    stress = 2.0 * (np.arange(layers) + 0.5) / layers - 1.0
    tension = stress > 0.0
    draws = layer.sample(np.random.default_rng(21), (n, int(tension.sum())))
    beams = (draws / stress[tension]).min(axis=1)
    expected = size_effect(whole, stress_integral(lambda y: 2.0 * y - 1.0, shape))
    # Four standard errors; 200 layers change the integral by less than 1e-3, the strength by a sixth of that.
    assert beams.mean() == pytest.approx(float(expected.mean), abs=4.0 * beams.std() / np.sqrt(n) + 2e-3)


def test_situations_are_columns():
    specimens = distribution("lognormal", mean=[30.0, 40.0], cov=0.2)
    part = size_effect(specimens, [1.0, 20.0])
    assert part.shape == (2,)
    assert float(part.ppf(0.5)[0]) == pytest.approx(float(specimens.ppf(0.5)[0]), rel=1e-12)
    assert float(part.ppf(0.5)[1]) < float(specimens.ppf(0.5)[1])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: size_effect(distribution("weibull", mean=1.0, cov=0.1), -2.0), "ratio of sizes must be .* got -2"),
        (lambda: size_factor([5.0, 0.0], 2.0), "Weibull shape must be positive and finite; got 0"),
        (lambda: stress_integral(lambda x: -x, 5.0), "nowhere above zero"),
        (lambda: stress_integral(lambda x: np.full_like(x, np.inf), 5.0), "finite"),
        (lambda: stress_integral(lambda x: x, 5.0, ((1.0, 0.0),)), "low < high"),
        (lambda: stress_integral(lambda *x: x[0], 5.0, ((0.0, 1.0),) * 4), "one to three"),
        (
            lambda: stress_integral(lambda x, y: np.where(x * x + 0.7 * y > 0.6, 1.0, 0.2), 5.0, SQUARE),
            "relative error of .* split the part",
        ),
    ],
)  # fmt: skip
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()
