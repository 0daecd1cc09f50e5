"""Parameters are arrays over situations: the same bits as one situation at a time, broadcasting, columns, draws."""

import numpy as np
import pytest

from calibrate.distributions import distribution, family, maximum_of, minimum_of

from .cases import CASES, made, sets

FAMILIES = [n for n in CASES if n != "constant"]
# Elements beyond any double precision tail must not change what their neighbours get.
U = np.array([-38.5, -12.0, -7.3, -3.0, -0.4, 0.0, 0.9, 2.6, 6.1, 12.0, 39.0])


def together(name):
    """Return all sets of a family as one distribution."""
    return distribution(
        name, **dict(zip(family(name).parameter_names, np.transpose(CASES[name]), strict=True))
    )


def everything(d, u, x):
    """Return all that a distribution computes elementwise at u and at x."""
    with np.errstate(all="ignore"):
        results = [d.x(u), *d.x_slope(u), *d.x_curvature(u), *d.parameter_slopes(u).values()]
        results += [d.u(x), d.logpdf(x), d.logcdf(x), d.logsf(x), d.mean, d.sd]
        return results


def assert_same_bits(d, u, x):
    """Assert that a batch of situations gives each of them what it gets in a chunk of its own."""
    whole = everything(d, u, x)
    for i in range(len(u)):
        one = everything(d.take(slice(i, i + 1)), u[i : i + 1], x[i : i + 1])
        for a, b in zip(whole, one, strict=True):
            np.testing.assert_array_equal(np.broadcast_to(a, u.shape)[i : i + 1], b)


@pytest.mark.parametrize("shift", range(0, len(U), 2))
@pytest.mark.parametrize("name", FAMILIES)
def test_a_batch_gives_the_bits_of_one_at_a_time(name, shift):
    d = together(name)
    u = np.roll(U, shift)[: d.shape[0]]
    x = d.x(np.clip(u, -8.0, 8.0))
    x[0] -= 1e9 * np.max(np.abs(x))
    assert_same_bits(d, u, x)


@pytest.mark.parametrize("ratio", [0.2, 50.0])
@pytest.mark.parametrize("extreme", [maximum_of, minimum_of])
@pytest.mark.parametrize("name", FAMILIES)
def test_extremes_in_a_batch_give_the_bits_of_one_at_a_time(name, extreme, ratio):
    base = together(name)
    n = base.shape[0]
    u = U[2 : n + 2]
    assert_same_bits(extreme(base, ratio * np.arange(1.0, n + 1.0)), u, base.x(u))


def kept_values(name):
    """Return values of the parameters that are given beside moments, in the same unit as means near 1."""
    known = {"threshold": 0.2, "shape": 0.1, "freedom": 6.0, "lower": 0.0, "upper": 5.0}
    return {k: known[k] for k in family(name).moments_keep}


@pytest.mark.parametrize("name", [n for n in FAMILIES if len(family(n).moment_names) == 2])
def test_moments_in_a_batch_give_the_bits_of_one_at_a_time(name):
    rng = np.random.default_rng(20262)
    means, covs = rng.uniform(0.6, 3.0, 16), np.exp(rng.uniform(-4.0, -0.6, 16))
    kept = kept_values(name)
    member = family(name)
    batch = member.solve({"mean": means, "cov": covs, **kept})
    slopes = member.argument_slopes({"mean": means, "cov": covs, **kept})
    for i in range(len(means)):
        one = {"mean": means[i : i + 1], "cov": covs[i : i + 1], **kept}
        own, own_slopes = member.solve(one), member.argument_slopes(one)
        for p in own:
            assert np.broadcast_to(batch[p], means.shape)[i] == own[p]
            for a in own_slopes[p]:
                assert np.broadcast_to(slopes[p][a], means.shape)[i] == own_slopes[p][a]


@pytest.mark.parametrize(("name", "parameters"), sets())
def test_scalars_arrays_and_columns_broadcast(name, parameters):
    d = made(name, parameters)
    assert d.shape == ()
    assert d.x(0.3).shape == ()
    assert d.x(np.zeros((4, 3))).shape == (4, 3)
    arrays = distribution(
        name, **{k: np.full(3, v) if i == 0 else v for i, (k, v) in enumerate(d.parameters.items())}
    )
    assert arrays.shape == (3,)
    u = np.array([[-1.0], [0.0], [0.5], [2.0]])
    for method in (arrays.logpdf, arrays.cdf, arrays.sf, arrays.u):
        assert method(arrays.x(u)).shape == (4, 3)
    for values in (*arrays.x_curvature(u), *arrays.x_slope(u), *arrays.parameter_slopes(u).values()):
        assert np.broadcast_shapes(values.shape, (4, 3)) == (4, 3)
    np.testing.assert_array_equal(arrays.x(u), np.broadcast_to(d.x(u), (4, 3)))


@pytest.mark.parametrize("name", FAMILIES)
def test_columns_are_taken(name):
    d = together(name)
    columns = np.array([2, 0]) if len(CASES[name]) > 2 else np.array([1, 0])
    taken = d.take(columns)
    assert taken.shape == (2,)
    np.testing.assert_array_equal(taken.x(0.7), d.x(0.7)[columns])
    one = made(name, CASES[name][0])
    assert one.take(columns) is one


@pytest.mark.parametrize("name", FAMILIES)
def test_parameters_cannot_be_written(name):
    given = np.array([CASES[name][0][0]] * 2)
    names = family(name).parameter_names
    d = distribution(name, **{names[0]: given, **dict(zip(names[1:], CASES[name][0][1:], strict=True))})
    before = d.x(1.0).copy()
    given += 1.0
    np.testing.assert_array_equal(d.x(1.0), before)
    for value in d.parameters.values():
        with pytest.raises(ValueError, match="read-only"):
            value[...] = 0.0
    with pytest.raises(TypeError):
        d.parameters["other"] = given


@pytest.mark.parametrize(("name", "parameters"), sets())
def test_draws_repeat_and_follow_the_distribution(name, parameters):
    d = made(name, parameters)
    x = d.sample(np.random.default_rng(7), 4000)
    np.testing.assert_array_equal(x, d.sample(np.random.default_rng(7), 4000))
    if d.is_constant:
        np.testing.assert_array_equal(x, d.mean)
        return
    assert not np.array_equal(x, d.sample(np.random.default_rng(8), 4000))
    # Kolmogorov's distance at 1e-4: ln(2/1e-4)/2 under the root.
    steps = np.arange(1, 4001) / 4000
    assert np.max(np.abs(d.cdf(np.sort(x)) - steps)) < np.sqrt(0.5 * np.log(2e4) / 4000)


def test_draws_have_one_column_per_situation():
    d = together("gumbel")
    rng = np.random.default_rng(1)
    assert d.sample(rng).shape == (3,)
    x = d.sample(rng, (40_000, 3))
    # Five standard errors of a mean; of an sd about twice as many.
    np.testing.assert_allclose(x.mean(axis=0), d.mean, rtol=0, atol=0.025 * np.max(d.sd))
    np.testing.assert_allclose(x.std(axis=0), d.sd, rtol=0.03)
