"""Alternatives of leading actions, and the exact maximum of sums of pulses, against closed forms and simulation."""

import numpy as np
import pytest

from calibrate.actions.combination import Action, combination_doubts, repetition_alternatives, turkstra
from calibrate.actions.fbc import fbc_maximum, fbc_maximum_cdf
from calibrate.distributions import distribution, maximum_of
from calibrate.errors import InputError

TENS = Action(distribution("gumbel", mean=0.6, cov=0.35), 5.0, name="Q1")
YEARS = Action(distribution("gumbel", mean=0.5, cov=0.4), 50.0, name="Q2")
SUSTAINED = Action(distribution("gamma", mean=0.8, cov=0.6), 2.0, name="sustained")
RARE = Action(distribution("weibull", mean=1.5, cov=0.4), 100.0, presence=0.02, name="rare")
STORMS = Action(distribution("lognormal", mean=0.4, cov=0.5), 10.0, presence=0.3, name="storms")


def standard(repetitions):
    return Action(distribution("normal", mean=0.0, sd=1.0), repetitions)


# Against what was computed elsewhere ------------------------------


def test_the_maximum_of_ten_year_and_annual_pulses():
    """Values of 1e6 simulations made for this test, tolerance 0.005.

    Three standard errors of them are 0.001 (mean, sd), 0.0025 (q95) and 0.005 (q99).
    """
    found = fbc_maximum([YEARS, TENS])
    expected = {"mean": 1.8192, "sd": 0.2626, "q95": 2.3009, "q99": 2.6027}
    q95, q99 = found.ppf([0.95, 0.99])
    got = {"mean": found.mean, "sd": found.sd, "q95": float(q95), "q99": float(q99)}
    assert got == pytest.approx(expected, abs=0.005)


def test_means_of_turkstras_alternatives():
    """The same simulations, and the closed form: the mean of a Gumbel maximum moves by sqrt(6)/pi sd ln n."""
    leads_tens, leads_years = (
        sum(float(d.mean) for d in a.distributions) for a in turkstra([TENS, YEARS], "point in time")
    )
    assert (leads_tens, leads_years) == pytest.approx((1.3635, 1.7102), abs=0.005)
    per_ln = np.sqrt(6.0) / np.pi
    assert leads_tens == pytest.approx(1.1 + per_ln * 0.21 * np.log(5.0), rel=1e-12)
    assert leads_years == pytest.approx(1.1 + per_ln * 0.2 * np.log(50.0), rel=1e-12)
    within = sum(float(d.mean) for d in turkstra([TENS, YEARS])[0].distributions)
    assert within == pytest.approx(leads_tens + per_ln * 0.2 * np.log(10.0), rel=1e-12)
    assert leads_tens < within < fbc_maximum([TENS, YEARS]).mean


# Closed forms ------------------------------


@pytest.mark.parametrize("repetitions", [1.0, 50.0, 1e7])
def test_two_normal_actions_that_change_together(repetitions):
    found = fbc_maximum([standard(repetitions), standard(repetitions)])
    exact = maximum_of(distribution("normal", mean=0.0, sd=np.sqrt(2.0)), repetitions)
    u = np.array([-6.0, -1.0, 0.0, 3.0, 12.0])
    np.testing.assert_allclose(found.u(exact.x(u)), u, atol=1e-8)
    np.testing.assert_allclose(found.x(u), exact.x(u), rtol=1e-8, atol=1e-8)
    assert found.mean == pytest.approx(float(exact.mean), abs=1e-8)
    assert found.sd == pytest.approx(float(exact.sd), rel=1e-8)
    np.testing.assert_allclose(found.isf([1e-9, 0.3]), exact.isf([1e-9, 0.3]), rtol=1e-8)


def test_three_normal_actions_that_change_together():
    found = fbc_maximum([standard(7.0)] * 3)
    exact = maximum_of(distribution("normal", mean=0.0, sd=np.sqrt(3.0)), 7.0)
    u = np.array([-3.0, 0.0, 8.0])
    np.testing.assert_allclose(found.u(exact.x(u)), u, atol=1e-8)
    assert float(found.ppf(0.95)) == pytest.approx(float(exact.ppf(0.95)), rel=1e-8)


def test_one_action_is_its_own_maximum():
    np.testing.assert_allclose(fbc_maximum([YEARS]).x([-2.0, 4.0]), YEARS.maximum().x([-2.0, 4.0]), rtol=1e-8)
    assert fbc_maximum([RARE]).mean == pytest.approx(float(RARE.maximum().mean), rel=1e-5)
    assert fbc_maximum([RARE]).sd == pytest.approx(float(RARE.maximum().sd), rel=1e-5)


def test_permanent_scatter_and_a_maximum_add():
    """An action with one repetition adds to the maximum of the other: gamma shapes add with equal scales."""
    slow = Action(distribution("gamma", shape=2.0, scale=0.7), 1.0)
    fast = Action(distribution("gamma", shape=3.0, scale=0.7), 1.0)
    both = distribution("gamma", shape=5.0, scale=0.7)
    x = np.array([0.2, 1.0, 5.0, 20.0])
    np.testing.assert_allclose(fbc_maximum_cdf([slow, fast], x), both.cdf(x), rtol=1e-8)
    np.testing.assert_allclose(fbc_maximum([slow, fast]).sf(x), both.sf(x), rtol=1e-8)
    assert fbc_maximum([slow, fast]).mean == pytest.approx(float(both.mean), rel=1e-7)


def test_absence_of_all_actions_has_its_own_probability():
    found = fbc_maximum([STORMS, RARE])
    nothing = 0.7**10 * 0.98**100
    assert float(found.cdf(0.0)) == pytest.approx(nothing, rel=1e-9)
    assert float(found.cdf(-1e-12)) == 0.0
    np.testing.assert_array_equal(found.ppf([1e-3, 0.9 * nothing]), 0.0)
    assert float(found.ppf(1.5 * nothing)) > 0.0
    np.testing.assert_array_equal(found.cdf([-np.inf, np.inf, np.nan]), [0.0, 1.0, np.nan])
    assert np.isnan(found.ppf(1.5))


def test_two_intermittent_pulses_by_the_total_probability():
    """One interval each: (1-p)(1-q) + (1-p) q F2 + p (1-q) F1 + p q F12, with gamma sums in closed form."""
    first = Action(distribution("gamma", shape=2.0, scale=1.0), 1.0, 0.3)
    second = Action(distribution("gamma", shape=1.5, scale=1.0), 1.0, 0.6)
    both = distribution("gamma", shape=3.5, scale=1.0)
    x = np.array([0.0, 0.4, 2.0, 9.0])
    expected = 0.7 * 0.4 + 0.7 * 0.6 * second.distribution.cdf(x) + 0.3 * 0.4 * first.distribution.cdf(x)
    np.testing.assert_allclose(
        fbc_maximum_cdf([first, second], x), expected + 0.3 * 0.6 * both.cdf(x), rtol=1e-7
    )


# Simulation ------------------------------


def pulses(action, rng, shape):
    """Return values of the action in its intervals, zero where it is absent."""
    values = action.distribution.sample(rng, shape)
    return np.where(rng.random(shape) < action.presence, values, 0.0) if action.presence < 1.0 else values


SETS = {
    "two": ([TENS, YEARS], 40_000),
    "intermittent and sustained": ([SUSTAINED, STORMS], 100_000),
    "both intermittent": ([STORMS, RARE], 40_000),
    "three": ([SUSTAINED, STORMS, RARE], 40_000),
}


@pytest.mark.parametrize("name", SETS)
def test_against_simulated_pulses(name):
    """Every error is below four standard errors of the simulation: sqrt(F (1 - F)/n) of a probability."""
    actions, n = SETS[name]
    rng = np.random.default_rng(30)
    total, before = np.zeros((n, 1)), 1
    for action in actions:
        count = int(action.repetitions)
        total = np.repeat(total, count // before, axis=1) + pulses(action, rng, (n, count))
        before = count
    maxima = total.max(axis=1)
    levels = np.quantile(maxima, [0.1, 0.5, 0.9, 0.99])
    cdf = fbc_maximum(actions).cdf(levels)
    share = np.array([np.mean(maxima <= x) for x in levels])
    assert (np.abs(cdf - share) < 4.0 * np.sqrt(cdf * (1.0 - cdf) / n) + 1.0 / n).all(), (cdf, share)
    if len(actions) == 2:
        found = fbc_maximum(actions)
        assert found.mean == pytest.approx(maxima.mean(), abs=4.0 * maxima.std() / np.sqrt(n))
        fourth = np.std((maxima - maxima.mean()) ** 2) / (2.0 * maxima.std() * np.sqrt(n))
        assert found.sd == pytest.approx(maxima.std(), abs=4.0 * fourth)


# Alternatives ------------------------------


def test_repetitions_of_three_actions():
    """The scheme r1, r2/r1, r3/r2 and what follows from it, for 2, 10 and 100 repetitions given in another order."""
    actions = [RARE, SUSTAINED, STORMS]
    assert [(a.leading, a.repetitions) for a in turkstra(actions)] == [
        (0, (100.0, 1.0, 1.0)),
        (1, (10.0, 2.0, 5.0)),
        (2, (10.0, 1.0, 10.0)),
    ]
    assert [a.repetitions for a in turkstra(actions, "point in time")] == [
        (100.0, 1.0, 1.0),
        (1.0, 2.0, 1.0),
        (1.0, 1.0, 10.0),
    ]
    assert [(a.leading, a.repetitions) for a in repetition_alternatives(actions)] == [
        (1, (10.0, 2.0, 5.0)),
        (1, (50.0, 2.0, 1.0)),
        (2, (10.0, 1.0, 10.0)),
        (0, (100.0, 1.0, 1.0)),
    ]
    for alternative in turkstra(actions):
        for d, n, action in zip(alternative.distributions, alternative.repetitions, actions, strict=True):
            assert float(d.cdf(1.1)) == pytest.approx(float(action.point_in_time.cdf(1.1) ** n), rel=1e-10)


@pytest.mark.parametrize("actions", [[TENS, YEARS], [SUSTAINED, STORMS], [STORMS, RARE]])
def test_no_alternative_exceeds_the_exact_maximum(actions):
    exact = fbc_maximum(actions)
    x = exact.ppf([0.05, 0.5, 0.95, 0.999])
    for alternative in repetition_alternatives(actions):
        once = [
            Action(a.distribution, n, a.presence).maximum()
            for a, n in zip(actions, alternative.repetitions, strict=True)
        ]
        # A sum over u is off by at most half a step where an action jumps from zero: 0.5 * 0.001 * 0.4.
        u = np.linspace(-8.0, 8.0, 16_001)
        mass = np.exp(-0.5 * u * u) / np.sqrt(2.0 * np.pi) * (u[1] - u[0])
        summed = once[1].cdf(x[:, None] - once[0].x(u)) @ mass
        assert (summed >= exact.cdf(x) - 2e-4).all()


# Doubts and refusals ------------------------------


def test_presence_beyond_the_period_is_doubted():
    weekly = Action(distribution("gamma", mean=1.0, cov=0.4), 2600.0, 0.5, "dust", duration=0.1)
    (doubt,) = combination_doubts([weekly], 50.0)
    assert (doubt.code, doubt.where) == ("presence-beyond-period", "combination.dust")
    assert "fill 130 years, more than the reference period of 50 years" in doubt.message
    fits = Action(distribution("gamma", mean=1.0, cov=0.4), 2600.0, 0.5, "dust", duration=1.0 / 52.0)
    assert combination_doubts([fits], 50.0) == ()


def test_negative_values_and_intervals_that_are_not_nested_are_doubted():
    depth = Action(distribution("normal", mean=1.0, cov=0.6), 600.0, 0.4, "dust")
    wind = Action(distribution("gumbel", mean=1.0, cov=0.2), 2600.0, name="wind")
    negative, nested = combination_doubts([wind, depth], 50.0)
    assert (negative.code, negative.where) == ("negative-when-present", "combination.dust")
    assert "4.8 %" in negative.message
    assert (nested.code, nested.where) == ("intervals-not-nested", "combination")
    assert "wind repeats 4.333 times within one interval of dust" in nested.message
    assert combination_doubts([TENS, YEARS], 50.0) == ()


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Action(YEARS.distribution, 0.5, name="w"), "w: the number of repetitions is at least 1; got 0.5"),
        (lambda: Action(YEARS.distribution, 5.0, 0.0), "probability of presence is above 0"),
        (lambda: Action(YEARS.distribution, 5.0, duration=-1.0), "duration is positive"),
        (lambda: Action(distribution("constant", value=1.0), 5.0), "has scatter"),
        (lambda: turkstra([]), "at least one variable action"),
        (lambda: turkstra([YEARS], "both"), "got 'both'"),
        (lambda: fbc_maximum([YEARS] * 4), "1 to 3 variable actions; got 4"),
        (lambda: fbc_maximum([Action(distribution("gumbel", mean=[1.0, 2.0], cov=0.2), 5.0)]), "one situation"),
    ],
)  # fmt: skip
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()
