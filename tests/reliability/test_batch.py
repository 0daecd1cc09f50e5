"""A situation's result is the same, to the last bit, alone and in any batch, chunk, thread and order."""

import numpy as np
import pytest

from calibrate.distributions import distribution, maximum_of
from calibrate.expressions import parse
from calibrate.reliability import CallableLimitState, ExpressionLimitState, FormSettings, form

N = 40
FIELDS = ("beta", "u", "x", "alpha", "gradient_norm", "code", "iterations")


def squares(R, D, L, z):
    return z * R - 0.5 * D - 0.3 * L**2


def slopes_of_squares(R, D, L, z):
    return {"R": z, "D": -0.5, "L": -0.6 * L}


# Each goes its own way through FORM: affine, seen in many places, with kinks, with two design points, without
# failure, not finite, by differences.
LIMIT_STATES = {
    "affine": "z * R - D - L",
    "product of powers": "z * R**0.8 * exp(-0.3 * D) - L",
    "kinks": "max(z - 2 * D**2, z - 3 * L * R)",
    "two points": "z - 0.5 * (R - 1)**2 * 100 + 0.1 * D - 0.05 * L",
    "mixed ends": "where(z >= 4, z + R**2 + D**2 + L**2, where(z >= 3, log(1 - L), z * R - D - L))",
    "callable": squares,
    "callable with gradient": squares,
}
VARIABLES = ("R", "D", "L")


def case(name, order=None):
    """Return limit state and distributions of N random situations, with numbers among the arrays."""
    rng = np.random.default_rng(3)
    z, cov, mean = rng.uniform(1.0, 5.0, N), rng.uniform(0.05, 0.4, N), rng.uniform(0.8, 1.2, N)
    order = np.arange(N) if order is None else order
    given = LIMIT_STATES[name]
    if isinstance(given, str):
        state = ExpressionLimitState(parse(given), VARIABLES, {"z": z[order]})
    else:
        slopes = slopes_of_squares if name.endswith("gradient") else None
        state = CallableLimitState(given, VARIABLES, {"z": z[order]}, slopes)
    base = distribution("gamma", mean=0.5 * mean[order], cov=cov[order])
    return state, (
        distribution("lognormal", mean=1.0, cov=cov[order]),
        distribution("weibull", mean=mean[order], cov=0.1),
        maximum_of(base, 5.0),
    )


def alone(result, at):
    return {name: getattr(result, name)[..., at] for name in FIELDS}


def assert_same(result, expected):
    for name in FIELDS:
        # Equal bits: NaN is equal to NaN, and zeros have the same sign.
        found, wanted = getattr(result, name), expected[name]
        assert found.shape == wanted.shape
        assert found.tobytes() == np.ascontiguousarray(wanted).tobytes(), name


@pytest.fixture(scope="module", params=LIMIT_STATES)
def name(request):
    return request.param


@pytest.fixture(scope="module")
def whole(name):
    return form(*case(name), N)


def test_the_cases_take_several_ways():
    ends = {name: set(form(*case(name), N).status) for name in LIMIT_STATES}
    assert ends["affine"] == {"converged"}
    assert "several design points" in ends["two points"]
    assert ends["mixed ends"] == {
        "converged",
        "no failure region within reach",
        "not converged: the limit state is not finite where it was needed",
    }


@pytest.mark.parametrize("as_array", [True, False], ids=["arrays of one", "numbers"])
def test_one_at_a_time_gives_the_bits_of_the_batch(name, whole, as_array):
    for j in range(0, N, 5):
        one = np.array([j]) if as_array else j
        assert_same(form(*case(name, one), 1), alone(whole, [j]))


@pytest.mark.parametrize(("chunk", "workers"), [(9, 1), (N - 1, 2), (13, 3)])
def test_chunks_and_threads_change_no_bit(name, whole, chunk, workers):
    settings = FormSettings(chunk=chunk)
    result = form(*case(name), N, settings=settings, workers=workers)
    assert_same(result, alone(whole, slice(None)))
    assert result.evaluations == whole.evaluations


@pytest.mark.parametrize("workers", [1, 2, 3])
def test_chunks_of_the_usual_size(workers):
    many = np.arange(2500) % N
    once = form(*case("affine"), N)
    assert_same(form(*case("affine", many), many.size, workers=workers), alone(once, many))


def test_the_order_of_situations_does_not_matter(name, whole):
    order = np.random.default_rng(11).permutation(N)
    assert_same(form(*case(name, order), N), alone(whole, order))


def test_a_situation_may_come_twice(name, whole):
    order = np.repeat(np.arange(N), 2)
    assert_same(form(*case(name, order), 2 * N), alone(whole, order))


def test_a_start_is_taken_by_situation(name, whole):
    """Continued from elsewhere, situations still do not see one another."""
    start = np.random.default_rng(12).standard_normal((3, N))
    start[:, 5] = np.nan
    result = form(*case(name), N, start=start)
    order = np.arange(N)[::-1]
    assert_same(form(*case(name, order), N, start=start[:, order]), alone(result, order))
    np.testing.assert_array_equal(result.converged, whole.converged)
    np.testing.assert_allclose(result.beta, whole.beta, atol=1e-9)


def test_no_situations_at_all():
    state = ExpressionLimitState(parse("R - D"), ("R", "D"), {})
    none = distribution("normal", mean=np.zeros(0), sd=1.0)
    result = form(state, (none, none), 0)
    assert (result.n, result.u.shape, result.evaluations) == (0, (2, 0), 0)


def test_progress_is_told_to_the_end():
    seen = []
    form(*case("affine"), N, settings=FormSettings(chunk=25), progress=lambda done, n: seen.append((done, n)))
    assert seen == [(25, N), (N, N)]
