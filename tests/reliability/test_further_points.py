"""Further design points: closed forms, published points, and dense looks at whole surfaces."""

import itertools
import math
from dataclasses import fields

import numpy as np
import pytest
from scipy import integrate, optimize, special
from scipy.spatial import cKDTree

from calibrate.distributions import distribution
from calibrate.errors import InputError
from calibrate.expressions import parse
from calibrate.reliability import Correlation, ExpressionLimitState, FormSettings, Problem, design_points
from calibrate.reliability.bulge import PUSH, RADIUS, Bulged
from calibrate.reliability.further_points import further_points
from calibrate.reliability.local_minimum import is_local_minimum, least_curvature
from calibrate.reliability.series_of_points import series_probability
from calibrate.reliability.verify import settle

STANDARD = distribution("normal", mean=0.0, sd=1.0)
# A. Der Kiureghian and T. Dakessian (1998), b = 5, k = 0.5, e = 0.1.
PARABOLA = "5 - v - 0.5 * (u - 0.1)**2"
# P. H. Waarts (2000), a series system of four branches; limit states and constants from memory.
FOUR_BRANCHES = (
    "min(min(3 + 0.1*(u - v)**2 - (u + v)/sqrt(2), 3 + 0.1*(u - v)**2 + (u + v)/sqrt(2)),"
    "min(u - v + 7/sqrt(2), v - u + 7/sqrt(2)))"
)
CUBIC = "b + c0 * u + c1 * v + c2 * u**2 + c3 * u * v + c4 * v**2 + c5 * u**3 + c6 * v**3"
SCALES = (1.0, 1.0, 0.3, 0.3, 0.3, 0.1, 0.1)


def standard(text, names, n=1, **values):
    state = ExpressionLimitState(parse(text), tuple(names), values)
    return Problem(state, tuple(STANDARD for _ in names), n)


def looked(problem, **options):
    found = design_points(problem)
    return found, further_points(problem, found, **options)


# Closed forms and published points ------------------------------


def test_both_sides_of_a_symmetric_limit_state():
    b = np.array([1.5, 3.0, 4.0, 7.5])
    found, result = looked(standard("b - abs(u)", "u", 4, b=b))
    np.testing.assert_array_equal(result.count, 2)
    np.testing.assert_allclose(result.beta[:2], [b, b], atol=1e-12)
    np.testing.assert_array_equal(result.u[0], found.u)
    np.testing.assert_allclose(result.u[1], -found.u, atol=1e-12)
    assert np.all(np.isnan(result.beta[2:]))
    np.testing.assert_allclose(
        series_probability(result.beta, result.alpha), 2.0 * special.ndtr(-b), rtol=1e-11
    )


def test_the_parabola_of_der_kiureghian_and_dakessian():
    _, result = looked(standard(PARABOLA, "uv"))
    assert result.count[0] == 2
    np.testing.assert_allclose(result.u[:2, :, 0], [[-2.74085, 0.96480], [2.91584, 1.03551]], atol=5e-6)
    np.testing.assert_allclose(result.beta[:2, 0], [2.90570, 3.09426], atol=5e-6)
    exact = integrate.quad(
        lambda u: special.ndtr(-(5.0 - 0.5 * (u - 0.1) ** 2)) * math.exp(-0.5 * u * u) / math.sqrt(2.0 * math.pi),
        -12.0, 12.0, points=[-3.0, 3.0], epsabs=1e-14,
    )[0]  # fmt: skip
    assert exact == pytest.approx(3.0163119e-3, rel=1e-7)
    both = series_probability(result.beta, result.alpha)[0]
    first = special.ndtr(-result.beta[0, 0])
    assert first == pytest.approx(1.832e-3, rel=1e-3)
    # Curvature is left out still; the second point is most of the error of the first.
    assert abs(both - exact) < 0.2 * abs(first - exact)


def test_four_branches():
    """The branches are planes at 3.5, and parabolas symmetric about the diagonal with their least distance 3 on it."""
    _, result = looked(standard(FOUR_BRANCHES, "uv"))
    assert result.count[0] == 4
    np.testing.assert_allclose(result.beta[:, 0], [3.0, 3.0, 3.5, 3.5], atol=1e-9)
    expected = {(1, 1): 3.0, (-1, -1): 3.0, (1, -1): 3.5, (-1, 1): 3.5}
    for signs, distance in expected.items():
        away = np.linalg.norm(result.u[:, :, 0] - np.array(signs) * distance / math.sqrt(2.0), axis=1)
        assert np.min(away) < 1e-5
    # Sum of the half spaces less the pairs; opposite ones exclude each other, the others are independent.
    p, q = special.ndtr(-3.0), special.ndtr(-3.5)
    independent = 1.0 - (1.0 - 2.0 * p) * (1.0 - 2.0 * q)
    assert series_probability(result.beta, result.alpha)[0] == pytest.approx(independent, rel=1e-5)


def test_where_the_origin_fails_the_safe_region_has_two_parts():
    _, result = looked(standard("u**2/4 + v**2/2 - 4", "uv"))
    assert result.count[0] == 2
    np.testing.assert_allclose(result.beta[:2, 0], -math.sqrt(8.0), atol=1e-9)
    np.testing.assert_allclose(np.abs(result.u[:2, :, 0]), [[0.0, math.sqrt(8.0)]] * 2, atol=1e-5)
    failure = series_probability(result.beta, result.alpha)[0]
    assert failure == pytest.approx(1.0 - 2.0 * special.ndtr(-math.sqrt(8.0)), abs=1e-14)


def test_correlated_variables():
    """|x + y| of correlated normal variables: sd sqrt(2 + 2 rho)."""
    rho, b = 0.6, 6.0
    factor = np.linalg.cholesky([[1.0, rho], [rho, 1.0]])
    state = ExpressionLimitState(parse("b - abs(x + y)"), ("x", "y"), {"b": b})
    _, result = looked(Problem(state, (STANDARD, STANDARD), 1, Correlation.of(factor)))
    assert result.count[0] == 2
    np.testing.assert_allclose(result.beta[:2, 0], b / math.sqrt(2.0 + 2.0 * rho), atol=1e-10)


def test_a_point_on_a_kink_is_found_beside_a_smooth_one():
    """max(3 - u, 3.5 - v) fails beyond the corner (3, 3.5); 4 + u beyond (-4, 0)."""
    _, result = looked(standard("min(max(3 - u, 3.5 - v), 4 + u)", "uv"), share=0.01)
    assert result.count[0] == 2
    np.testing.assert_allclose(result.u[:2, :, 0], [[-4.0, 0.0], [3.0, 3.5]], atol=1e-5)


def test_points_on_a_sphere_are_more_than_can_be_told():
    _, result = looked(standard("9 - u**2 - v**2", "uv"), most=3)
    assert result.count[0] == 3
    assert result.more[0]
    np.testing.assert_allclose(result.beta[:, 0], 3.0, atol=1e-9)


def test_saddle_points_are_left_out():
    """4 - u - v w: the point (4, 0, 0) on the axis is a saddle, the others are (1, r, r) and (1, -r, -r), r^2 = 3."""
    _, result = looked(standard("4 - u - v * w", "uvw"))
    assert result.count[0] == 2
    np.testing.assert_allclose(result.beta[:2, 0], math.sqrt(7.0), atol=1e-9)
    assert result.u[0, 1, 0] * result.u[1, 1, 0] == pytest.approx(-3.0, abs=1e-4)


@pytest.mark.parametrize(
    ("text", "least"), [("4 - u - v*w", -3.0), ("3 - u - 0.1*v**2", 0.4), ("3 - u - w", 1.0)]
)
def test_second_order_condition_at_the_foot_on_the_axis(text, least):
    """Eigenvalues of I + (beta/|grad g|) H across alpha, by hand; w = 3/2 at the foot of the plane."""
    problem = standard(text, "uvw")
    start = {"4 - u - v*w": [4.0, 0.0, 0.0], "3 - u - w": [1.5, 0.0, 1.5]}.get(text, [3.0, 0.0, 0.0])
    points = settle(problem, np.array(start)[:, None])
    np.testing.assert_allclose(least_curvature(problem, points), least, atol=1e-12)
    assert is_local_minimum(problem, points)[0] == (least > 0.0)


# What is told and what is not ------------------------------


def test_a_nearer_point_is_a_finding():
    problem = standard(PARABOLA, "uv")
    start = np.array([[2.9], [1.0]])
    given = design_points(problem, start=start, settings=FormSettings(verify=False))
    assert given.beta[0] == pytest.approx(3.09426, abs=5e-6)
    result = further_points(problem, given)
    assert result.nearer[0]
    assert result.count[0] == 2
    np.testing.assert_array_equal(result.u[0], given.u)
    assert result.beta[1, 0] == pytest.approx(2.90570, abs=5e-6)
    assert not looked(problem)[1].nearer[0]


def test_points_of_too_small_a_share_are_left_out():
    """Planes at 3 and 4 on opposite sides; Phi(-4)/Phi(-3) = 0.0235."""
    problem = standard("min(3 - u, 4 + u)", "u")
    assert special.ndtr(-4.0) / special.ndtr(-3.0) == pytest.approx(0.0235, abs=1e-4)
    assert looked(problem, share=0.024)[1].count[0] == 1
    assert looked(problem, share=0.023)[1].count[0] == 2


def test_situations_without_design_point_have_none():
    problem = standard("b - abs(u)", "u", 3, b=np.array([3.0, 40.0, 2.0]))
    found, result = looked(problem)
    np.testing.assert_array_equal(found.converged, [True, False, True])
    np.testing.assert_array_equal(result.count, [2, 0, 2])
    assert np.all(np.isnan(result.u[:, :, 1]))
    assert np.isnan(series_probability(result.beta, result.alpha)[1])


def test_what_does_not_fit_is_refused():
    problem = standard("b - abs(u)", "u", 2, b=np.array([3.0, 2.0]))
    found = design_points(problem)
    with pytest.raises(InputError, match=r"the problem needs \(1, 1\)"):
        further_points(problem.take(np.array([0]), 1), found)
    with pytest.raises(InputError, match="at least 1"):
        further_points(problem, found, most=0)
    for share in (0.0, 1.5, math.nan):
        with pytest.raises(InputError, match="share"):
            further_points(problem, found, share=share)


# Many surfaces ------------------------------


def test_monotone_problems_have_one_point():
    rng = np.random.default_rng(5)
    n = 6
    families = ("normal", "lognormal", "gumbel", "weibull")
    for one, other in itertools.product(families, families):
        r = distribution(one, mean=rng.uniform(1.5, 3.0, n), cov=rng.uniform(0.05, 0.25, n))
        s = distribution(other, mean=1.0, cov=rng.uniform(0.05, 0.4, n))
        problem = Problem(ExpressionLimitState(parse("R - S"), ("R", "S"), {}), (r, s), n)
        found, result = looked(problem)
        np.testing.assert_array_equal(result.count, found.converged)
        assert not result.nearer.any()
        np.testing.assert_array_equal(result.beta[0], found.beta)


def cubics(n, seed):
    rng = np.random.default_rng(seed)
    c = np.array([scale * rng.normal(size=n) for scale in SCALES])
    b = rng.uniform(2.0, 5.0, n)
    return b, c, standard(CUBIC, "uv", n, b=b, **{f"c{i}": row for i, row in enumerate(c)})


def entries(b, k, radii):
    """Return the radii, up to two for each ray, at which failure is entered: b + k0 r + k1 r^2 + k2 r^3 falls to 0."""
    r = radii[:, None]
    g = b + r * (k[0] + r * (k[1] + r * k[2]))
    down = (g[:-1] > 0.0) & (g[1:] <= 0.0)
    number = np.cumsum(down, axis=0)
    for order in (1, 2):
        hit = down & (number == order)
        at = np.argmax(hit, axis=0)
        low, high = radii[at], radii[at + 1]
        for _ in range(40):
            middle = 0.5 * (low + high)
            safe = b + middle * (k[0] + middle * (k[1] + middle * k[2])) > 0.0
            low, high = np.where(safe, middle, low), np.where(safe, high, middle)
        yield np.where(hit.any(axis=0), high, np.nan)


def probable(radius, nearest, share=0.1):
    return special.log_ndtr(-radius) > special.log_ndtr(-nearest) + math.log(share)


def test_random_cubics_against_a_look_in_every_direction():
    n = 60
    b, c, problem = cubics(n, 3)
    found, result = looked(problem)
    turn = np.linspace(0.0, 2.0 * np.pi, 3000, endpoint=False)
    u, v = np.cos(turn), np.sin(turn)
    radii = np.arange(0.0, 6.0, 0.04)
    total = missed = spurious = 0
    for j in np.flatnonzero(found.converged & (found.beta < 5.0)):
        k = (
            c[0, j] * u + c[1, j] * v,
            c[2, j] * u**2 + c[3, j] * u * v + c[4, j] * v**2,
            c[5, j] * u**3 + c[6, j] * v**3,
        )
        minima = []
        for radius in entries(b[j], k, radii):
            left, right = np.roll(radius, 1), np.roll(radius, -1)
            lowest = (radius < left) & (radius <= right) & (left - radius < 0.03) & (right - radius < 0.03)
            minima += [(r, r * u[i], r * v[i]) for i in np.flatnonzero(lowest) for r in (radius[i],)]
        minima = np.array(minima)
        points = result.u[: result.count[j], :, j]
        away = np.linalg.norm(minima[:, None, 1:] - points[None], axis=2)
        near = 0.06 * np.maximum(minima[:, :1], 1.0)
        wanted = probable(minima[:, 0], min(found.beta[j], np.min(minima[:, 0])), 0.101)
        total += np.count_nonzero(wanted)
        missed += np.count_nonzero(wanted & np.all(away > near, axis=1))
        spurious += np.count_nonzero(np.all(away > near, axis=0))
    assert total > 60
    assert spurious == 0
    # The search looks in many places, not everywhere.
    assert missed <= 0.02 * total
    assert np.count_nonzero(result.count > 1) > 5


def test_random_surfaces_in_space_against_a_look_in_every_direction():
    n = 14
    rng = np.random.default_rng(11)
    values = {f"a{i}": rng.normal(size=n) for i in range(3)}
    values |= {f"q{i}": 0.35 * rng.normal(size=n) for i in range(6)}
    values |= {f"k{i}": 0.06 * rng.normal(size=n) for i in range(3)} | {"b": rng.uniform(2.5, 4.5, n)}
    text = (
        "b + a0*u + a1*v + a2*w + q0*u**2 + q1*v**2 + q2*w**2 + q3*u*v + q4*u*w + q5*v*w"
        " + k0*u**3 + k1*v**3 + k2*w**3"
    )
    problem = standard(text, "uvw", n, **values)
    found, result = looked(problem)
    size = 20_000
    i = np.arange(size) + 0.5
    height, turn = 1.0 - 2.0 * i / size, np.pi * (1.0 + math.sqrt(5.0)) * i
    flat = np.sqrt(1.0 - height**2)
    rays = np.array([flat * np.cos(turn), flat * np.sin(turn), height])
    _, around = cKDTree(rays.T).query(rays.T, k=13)
    u, v, w = rays
    total = missed = spurious = 0
    for j in np.flatnonzero(found.converged & (found.beta < 5.0)):
        at = {name: row[j] for name, row in values.items()}
        k = (
            at["a0"] * u + at["a1"] * v + at["a2"] * w,
            at["q0"] * u**2 + at["q1"] * v**2 + at["q2"] * w**2
            + at["q3"] * u * v + at["q4"] * u * w + at["q5"] * v * w,
            at["k0"] * u**3 + at["k1"] * v**3 + at["k2"] * w**3,
        )  # fmt: skip
        radius = next(entries(at["b"], k, np.arange(0.0, 6.0, 0.1)))
        lowest = np.all(radius[around[:, 1:]] > radius[:, None], axis=1)
        minima = (rays * radius)[:, lowest].T
        distance = radius[lowest]
        points = result.u[: result.count[j], :, j]
        away = np.linalg.norm(minima[:, None] - points[None], axis=2)
        near = 0.1 * np.maximum(distance, 1.0)
        wanted = probable(distance, min(found.beta[j], np.min(distance)), 0.105)
        total += np.count_nonzero(wanted)
        missed += np.count_nonzero(wanted & np.all(away > near[:, None], axis=1))
        spurious += np.count_nonzero(np.all(away > near[:, None], axis=0))
    assert total > 14
    assert (missed, spurious) == (0, 0)


def stationary(b, c, q):
    """Yield the local minima of the distance on b + sum(c u + q u^2) = 0 within failure's reach, by their multiplier.

    u = -t c / (1 + 2 t q) for the multiplier t > 0 of the Lagrangian; g along it is looked at between its poles.
    """
    poles = np.sort(-0.5 / q[q < 0.0])
    edges = [0.0, *poles, max(10.0, 3.0 * np.max(poles, initial=1.0))]

    def point(t):
        return -t * c / (1.0 + 2.0 * t * q)

    def g(t):
        u = point(t)
        return b + np.sum(c * u + q * u * u)

    for low, high in itertools.pairwise(edges):
        t = low + (high - low) * (0.5 - 0.5 * np.cos(np.pi * np.linspace(0.002, 0.998, 600)))
        values = np.array([g(one) for one in t])
        for i in np.flatnonzero(values[:-1] * values[1:] < 0.0):
            root = optimize.brentq(g, t[i], t[i + 1], xtol=1e-13)
            u = point(root)
            normal = c + 2.0 * q * u
            across = np.linalg.svd(normal[None])[2][1:]
            if np.min(np.linalg.eigvalsh(across @ np.diag(1.0 + 2.0 * root * q) @ across.T)) > 0.0:
                yield u


def test_quadrics_of_six_variables_against_all_their_stationary_points():
    n, m = 25, 6
    rng = np.random.default_rng(8)
    b, c, q = rng.uniform(3.0, 5.0, n), 0.5 * rng.normal(size=(m, n)), 0.25 * rng.normal(size=(m, n))
    names = [f"u{i}" for i in range(m)]
    text = "b + " + " + ".join(f"c{i}*u{i} + q{i}*u{i}**2" for i in range(m))
    rows = {f"c{i}": c[i] for i in range(m)} | {f"q{i}": q[i] for i in range(m)}
    found, result = looked(standard(text, names, n, b=b, **rows))
    assert found.converged.all()
    for j in range(n):
        exact = sorted(stationary(b[j], c[:, j], q[:, j]), key=np.linalg.norm)
        distance = np.array([np.linalg.norm(u) for u in exact])
        wanted = [u for u, d in zip(exact, distance, strict=True) if probable(d, distance[0])]
        assert result.count[j] == len(wanted)
        np.testing.assert_allclose(result.u[: len(wanted), :, j], wanted, atol=1e-4)
    assert np.count_nonzero(result.count > 1) > 3


def test_a_situation_is_the_same_alone_and_among_others():
    _, _, problem = cubics(30, 4)
    found, result = looked(problem)
    for j in (0, 7, 29):
        single = np.array([j])
        part = problem.take(single, 1)
        alone = further_points(part, design_points(part))
        for name in ("u", "beta", "alpha", "count", "nearer", "more"):
            np.testing.assert_array_equal(getattr(alone, name)[..., 0], getattr(result, name)[..., j])
    again = further_points(problem, found)
    for field in fields(again):
        np.testing.assert_array_equal(getattr(again, field.name), getattr(result, field.name))


# Bulges ------------------------------


def test_a_bulge_has_its_height_its_extent_and_its_gradient():
    problem = standard(PARABOLA, "uv", 3)
    found = design_points(problem)
    centre = np.full((2, 2, 3), np.nan)
    centre[:, 0] = found.u
    beta, norm = (np.stack([row, np.full(3, np.nan)]) for row in (found.beta, found.gradient_norm))
    bulged = Bulged.around(problem, centre, beta, norm, np.ones(3))
    size = found.beta[0]
    # At the distance PUSH beta from the point the bulge is as high as the gradient times that distance.
    for part, height in ((PUSH, PUSH * size * found.gradient_norm[0]), (RADIUS, 0.0), (RADIUS + 0.1, 0.0)):
        u = found.u - part * found.alpha * found.beta
        np.testing.assert_allclose(bulged.value(u) - problem.value(u), height, atol=1e-12)
    u = found.u + np.array([[0.3, -1.1, 4.0], [0.2, 0.7, 0.1]])
    a, step = np.empty_like(u), 1e-6
    g = bulged.evaluate(u, a)[0]
    np.testing.assert_array_equal(g, bulged.value(u))
    for i in range(2):
        move = step * (np.arange(2) == i)[:, None]
        slope = (bulged.value(u + move) - bulged.value(u - move)) / (2.0 * step)
        np.testing.assert_allclose(a[i], slope, rtol=1e-7, atol=1e-7)
    np.testing.assert_array_equal(bulged.take(np.array([1]), 1).value(u[:, 1:2]), bulged.value(u)[1:2])


# Half spaces in series ------------------------------


def test_two_half_spaces_against_an_integral():
    """P(either) = P1 + int over the other side of the first plane, by quadrature over one normal variable."""
    beta = np.array([[2.5, 3.0, 0.4], [2.7, 3.0, 1.0]])
    rho = np.array([0.8, -0.5, 0.3])
    alpha = np.array([[np.ones(3), np.zeros(3)], [rho, np.sqrt(1.0 - rho**2)]])
    found = series_probability(beta, alpha)
    for j in range(3):
        root = math.sqrt(1.0 - rho[j] ** 2)
        rest = integrate.quad(
            lambda z, j=j, root=root: special.ndtr((-beta[1, j] - rho[j] * z) / root)
            * math.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi),
            -beta[0, j], 12.0, epsabs=1e-15, epsrel=1e-12,
        )[0]  # fmt: skip
        assert found[j] == pytest.approx(special.ndtr(-beta[0, j]) + rest, rel=1e-9)


def test_independent_and_coinciding_half_spaces():
    beta = np.array([[2.0, 3.0, 2.5], [2.5, 3.0, np.nan], [3.0, 3.0, np.nan]])
    alpha = np.repeat(np.eye(3)[:, :, None], 3, axis=2)
    alpha[:, :, 1] = alpha[0, :, 1]
    alpha[1:, :, 2] = np.nan
    p = special.ndtr(-beta)
    expected = [1.0 - np.prod(1.0 - p[:, 0]), special.ndtr(-3.0), special.ndtr(-2.5)]
    np.testing.assert_allclose(series_probability(beta, alpha), expected, rtol=1e-9)
