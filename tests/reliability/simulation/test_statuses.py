"""How situations end that do not simply reach the wanted precision, and wrong calls."""

import numpy as np
import pytest
from scipy import special, stats

from calibrate.errors import InputError
from calibrate.reliability import design_points
from calibrate.reliability.simulation import METHODS, simulate
from calibrate.reliability.simulation.base import Values
from calibrate.reliability.simulation.interval import binomial, of_mean
from calibrate.reliability.simulation.moments import Sums, estimate
from calibrate.reliability.simulation.root import between

BOUNDED = ("crude monte carlo", "directional simulation", "line sampling", "subset simulation")


@pytest.mark.parametrize("method", BOUNDED)
def test_no_failure_seen(standard, method):
    problem = standard("30 - x + 0 * y", ["x", "y"])
    point = np.array([[9.0], [0.0]])
    result = simulate(problem, method, seed=1, most=40_000, points=point)
    assert result.status[0] == f"no failure seen in {result.samples[0]} samples"
    assert result.samples[0] <= 41_000
    assert result.probability == 0.0
    assert result.lower == 0.0
    assert 0.0 < result.upper[0] < 0.02
    assert result.beta == np.inf
    assert result.beta_lower == pytest.approx(-special.ndtri(result.upper))
    assert not result.reached.any()


def test_the_bound_of_crude_monte_carlo_is_the_rule_of_three(standard):
    # One-sided 95 %: 3 / N; the two-sided interval has 97.5 % on this side, -ln(0.025) / N.
    problem = standard("30 - x", ["x"])
    result = simulate(problem, "crude monte carlo", seed=1, most=20_000)
    assert result.upper == pytest.approx(-np.log(0.025) / (result.samples - 1), rel=1e-3)
    looser = simulate(problem, "crude monte carlo", seed=1, most=20_000, confidence=0.9)
    assert looser.upper == pytest.approx(3.0 / (result.samples - 1), rel=0.002)


def test_no_survival_seen(standard):
    problem = standard("-30 - x", ["x"])
    result = simulate(problem, "crude monte carlo", seed=1, most=5000)
    assert result.status[0].startswith("no safe state seen in ")
    assert result.probability == 1.0
    assert result.upper == 1.0
    assert 1.0 - result.lower == pytest.approx(-np.log(0.025) / (result.samples - 1), rel=1e-3)
    assert result.beta == -np.inf
    assert result.beta_upper == pytest.approx(special.ndtri(1.0 - result.lower), rel=1e-6)


def test_importance_sampling_around_a_wrong_point(standard):
    problem = standard("30 - x", ["x"])
    result = simulate(problem, "importance sampling", seed=1, most=5000, points=np.array([[3.0]]))
    assert result.status[0].startswith("no failure seen in ")
    assert result.probability == 0.0
    # Weights bound nothing that was not seen.
    assert np.isnan(result.upper[0])
    assert np.isnan(result.beta_lower[0])


@pytest.mark.parametrize("method", METHODS)
def test_budget(standard, method):
    problem = standard("2.5 - x + 0.2 * (y**2 + z**2)", ["x", "y", "z"], 3)
    most = 5000
    result = simulate(problem, method, seed=1, cov=0.001, most=most, reliability=design_points(problem))
    assert set(result.status) <= {"sample budget spent", "reached the wanted cov"} | {
        f"no failure seen in {s} samples" for s in result.samples
    }
    assert "reached the wanted cov" not in result.status
    assert (result.samples <= 1.05 * most).all()
    assert (result.samples > 0.4 * most).all()


def test_the_smallest_budget(standard):
    problem = standard("1 - x + 0.2 * y**2", ["x", "y"], 3)
    found = design_points(problem)
    # Importance sampling takes two evaluations at a time.
    for method, most in (("crude monte carlo", 100), ("importance sampling", 130)):
        result = simulate(problem, method, seed=1, cov=1e-4, most=most, reliability=found)
        assert (result.samples <= most).all()
        assert (result.samples >= 64).all()


@pytest.mark.parametrize("method", METHODS)
def test_not_defined(standard, method):
    # log of a negative number beyond x = 1: half a dozen in a hundred samples, and all at the point.
    problem = standard("where(b >= 5, log(1 - x) + 3, b - x)", ["x"], 2, b=np.array([6.0, 2.0]))
    result = simulate(problem, method, seed=1, cov=0.1, points=np.array([[0.95, 2.0]]))
    assert list(result.status) == ["limit state not finite in samples", "reached the wanted cov"]
    for name in ("probability", "cov", "lower", "upper", "beta", "beta_lower", "beta_upper"):
        assert np.isnan(getattr(result, name)[0])
        assert np.isfinite(getattr(result, name)[1])


@pytest.mark.parametrize("sobol", [False, True])
@pytest.mark.parametrize("method", ["importance sampling", "line sampling"])
def test_no_design_point(standard, method, sobol):
    problem = standard("b - x", ["x"], 2, b=np.array([40.0, 2.0]))
    result = simulate(problem, method, seed=1, reliability=design_points(problem), sobol=sobol)
    assert list(result.status) == ["no design point to sample around", "reached the wanted cov"]
    assert np.isnan(result.probability[0])
    assert result.samples[0] == 0


def test_a_limit_state_through_the_medians(standard):
    problem = standard("x + 0 * y", ["x", "y"])
    found = design_points(problem)
    for method in METHODS:
        result = simulate(problem, method, seed=1, cov=0.05, reliability=found)
        assert result.beta == pytest.approx(0.0, abs=0.3)


def test_results_are_read_only(standard):
    result = simulate(standard("2 - x", ["x"], 2), "crude monte carlo", seed=1, cov=0.2)
    with pytest.raises(ValueError, match="read-only"):
        result.samples[0] = 1


# Wrong calls ------------------------------


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"cov": 0.0}, "must be positive; got 0.0"),
        ({"cov": -0.1}, "must be positive; got -0.1"),
        ({"cov": np.nan}, "must be positive; got nan"),
        ({"most": 99}, "at least 100 evaluations for each situation; got most = 99"),
        ({"confidence": 1.0}, "between 0 and 1; got 1.0"),
        ({"seed": -1}, "at least 0; got -1"),
        ({"keys": np.array([1])}, r"shape \(2,\); got shape \(1,\)"),
        ({"keys": np.array([1.0, 2.0])}, "float64"),
        ({"keys": np.array([-1, 2])}, "at least 0; got -1"),
        ({"method": "crude"}, "no method of simulation 'crude'"),
        ({"method": "importance smapling"}, "Did you mean 'importance sampling'"),
        (
            {"method": "guessing"},
            "Known: crude monte carlo, importance sampling, directional simulation, subset sim",
        ),
        ({"method": "importance sampling"}, "needs design points. Give reliability"),
        ({"method": "line sampling"}, "needs design points. Give reliability"),
        (
            {"method": "importance sampling", "points": np.zeros((3, 2))},
            r"shape \(k, 1, 2\); got \(1, 3, 2\)",
        ),
        ({"method": "directional simulation", "most": 200}, "Directional simulation needs at least 3000"),
        ({"method": "subset simulation", "most": 200}, "Subset simulation needs at least 2000"),
        ({"method": "subset simulation", "sobol": True}, "Sobol points do not serve subset simulation"),
        ({"sobol": True, "most": 500}, "Crude monte carlo with Sobol points needs at least 1025"),
    ],
)
def test_wrong_calls(standard, options, message):
    with pytest.raises(InputError, match=message):
        simulate(
            **{"problem": standard("2 - x", ["x"], 2), "method": "crude monte carlo", "seed": 1, **options}
        )


def test_nothing_varies():
    from calibrate.distributions import distribution
    from calibrate.expressions import parse
    from calibrate.reliability import ExpressionLimitState, Problem

    problem = Problem(ExpressionLimitState(parse("c - 1"), ("c",)), (distribution("constant", value=2.0),), 1)
    with pytest.raises(InputError, match="at least one variable must be random"):
        simulate(problem, "crude monte carlo", seed=1)


# Parts ------------------------------


def test_binomial_interval_is_that_of_scipy():
    hits, trials = np.array([0, 1, 7, 50, 99, 100]), np.full(6, 100)
    lower, upper = binomial(hits.astype(float), trials.astype(float), 0.95)
    for k, low, high in zip(hits, lower, upper, strict=True):
        expected = stats.binomtest(int(k), 100).proportion_ci(0.95, "exact")
        assert low == pytest.approx(expected.low, rel=1e-9, abs=1e-12)
        assert high == pytest.approx(expected.high, rel=1e-9)


def test_interval_of_a_mean_is_the_usual_one_when_it_is_narrow():
    lower, upper = of_mean(np.array([2e-5]), np.array([0.001]), np.array([1e6]), 0.95)
    assert lower == pytest.approx(2e-5 * (1.0 - 0.00195996), rel=3e-6)
    assert upper == pytest.approx(2e-5 * (1.0 + 0.00195996), rel=3e-6)


def test_the_control_leaves_the_estimate_unbiased():
    # 4000 first rounds of 64 samples, value x^2 with control x, both uniform: mean 1/3. The usual regression on the
    # same samples is off by about 1 / (180 * 64) = 9e-5 to either side, the scatter of this mean is 2e-4.
    rng = np.random.default_rng(5)
    n = 4000
    x = rng.random((n, 64))
    sums = Sums.zeros(3, n)
    owner = np.repeat(np.arange(n), 2)
    sums.add(np.tile([0, 1], n), owner, Values((x * x).ravel(), x.ravel(), 1))
    found = estimate(sums, np.full(n, 0.5), np.zeros(n))
    plain = estimate(sums, None, np.zeros(n))
    scatter = np.std(found.mean) / np.sqrt(n)
    assert np.mean(found.mean) == pytest.approx(1.0 / 3.0, abs=4.0 * scatter)
    # Correlation sqrt(15)/4 of x and x^2 leaves a quarter of the standard deviation.
    assert np.std(found.mean) / np.std(plain.mean) == pytest.approx(0.25, rel=0.1)
    assert np.mean(found.cov) == pytest.approx(np.std(found.mean) * 3.0, rel=0.1)


def test_roots():
    # cos x = x^k / 10 and a jump: witnessed by the functions themselves and the place of the jump.
    k = np.array([1.0, 3.0, 9.0])

    def smooth(t, at):
        return np.cos(t) - t ** (k if at is None else k[at]) / 10.0

    lower, upper = np.zeros(3), np.full(3, 2.0)
    root, passes = between(smooth, lower, upper, smooth(lower, None), smooth(upper, None))
    np.testing.assert_allclose(smooth(root, None), 0.0, atol=1e-8)
    assert passes.max() < 15
    root, passes = between(
        lambda t, at: np.where(t < 0.7, 5.0, -1e-3),
        np.zeros(1),
        np.ones(1),
        np.array([5.0]),
        np.array([-1e-3]),
    )
    assert root == pytest.approx(0.7, abs=2e-9)
    assert passes[0] < 60
    root, _ = between(
        lambda t, at: np.full(t.shape, np.nan), np.zeros(1), np.ones(1), np.ones(1), -np.ones(1)
    )
    assert np.isnan(root[0])
