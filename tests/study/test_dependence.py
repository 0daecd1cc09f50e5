"""Correlated and conditional basic variables in studies, against closed forms and equivalent studies."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.study import run

# Resistance and effect lognormal or normal, so that beta has a closed form with and without dependence.
HEAD = """\
format = 1
study = { title = "Dependence", reference_period = 50 }
target = { beta = 3.8 }

[situations.axes]
E_k = { values = [1.0, 2.0, 3.5], unit = "kN" }

[rules.member]
design_check = "R_d >= gamma * E_k"
sizes = "R_d"
limit_state = "R >= E"

[factors]
gamma = { present = 2.0, lower = 0.6, upper = 6.0 }
"""
NORMAL = """
[variables.R]
family = "normal"
mean = "1.2 * R_d"
cov = 0.1

[variables.E]
family = "normal"
mean = "0.6 * E_k"
cov = 0.2
"""
LOGNORMAL = NORMAL.replace('"normal"', '"lognormal"')


def solved(tmp_path, text):
    from calibrate.study import read_study

    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    return run(read_study(path))


def present(result):
    return result.situations["beta_present"].to_numpy()


def normal_beta(rho, gamma=2.0):
    r, e = 1.2 * gamma, 0.6
    a, b = 0.1 * r, 0.2 * e
    return (r - e) / np.sqrt(a * a + b * b - 2.0 * rho * a * b)


def lognormal_beta(rho, gamma=2.0):
    """Closed form: ln R - ln E is normal; the correlation of the logarithms follows from that of the values."""
    zr, ze = (np.sqrt(np.log1p(v * v)) for v in (0.1, 0.2))
    rho_log = np.log1p(rho * 0.1 * 0.2) / (zr * ze)
    medians = (1.2 * gamma / np.sqrt(1.01)) / (0.6 / np.sqrt(1.04))
    return np.log(medians) / np.sqrt(zr**2 + ze**2 - 2.0 * rho_log * zr * ze)


@pytest.mark.parametrize("rho", [-0.6, 0.0, 0.3, 0.8])
def test_correlated_normal_and_lognormal_pairs(tmp_path, rho):
    pair = f'\n[correlations]\n"R, E" = {rho}\n'
    np.testing.assert_allclose(present(solved(tmp_path, HEAD + NORMAL + pair)), normal_beta(rho), rtol=1e-9)
    found = present(solved(tmp_path, HEAD + LOGNORMAL + pair))
    np.testing.assert_allclose(found, lognormal_beta(rho), rtol=1e-7)


def test_the_optimal_factor_under_correlation_is_that_of_the_closed_form(tmp_path):
    """The covs do not depend on the size, so that beta = 3.8 can be met exactly, with exact derivatives."""
    from scipy.optimize import brentq

    result = solved(tmp_path, HEAD + LOGNORMAL + '\n[correlations]\n"E, R" = 0.4\n')
    exact = brentq(lambda g: lognormal_beta(0.4, g) - 3.8, 0.6, 6.0, xtol=1e-12)
    assert result.factors["optimal"].iloc[0] == pytest.approx(exact, abs=1e-6)


def test_a_rank_correlation(tmp_path):
    """Of a Gaussian copula: rho = 2 sin(pi r / 6) in normal space (K. Pearson 1907)."""
    text = HEAD + NORMAL + '\n[correlations]\n"R, E" = { coefficient = 0.5, kind = "rank" }\n'
    np.testing.assert_allclose(
        present(solved(tmp_path, text)), normal_beta(2.0 * np.sin(np.pi * 0.5 / 6.0)), rtol=1e-9
    )


def test_a_conditional_normal_variable_is_a_correlated_one(tmp_path):
    """E given R is normal with a linear mean: both together are bivariate normal."""
    conditional = NORMAL.replace(
        'mean = "0.6 * E_k"\ncov = 0.2', 'mean = "0.6 * E_k + 0.3 * (R - 1.2 * R_d)"\nsd = "0.12 * E_k"'
    )
    r, sd_r = 2.4, 0.24
    sd = np.hypot(0.7 * sd_r, 0.12)
    found = present(solved(tmp_path, HEAD + conditional))
    np.testing.assert_allclose(found, (r - 0.6) / sd, rtol=1e-9)


def test_a_conditional_lognormal_variable_is_a_product(tmp_path):
    """E given X is lognormal with a mean proportional to X and a constant cov: E = X W with independent W."""
    given = (
        HEAD
        + LOGNORMAL.replace('"0.6 * E_k"', '"0.6 * E_k * X"')
        + '\n[variables.X]\nfamily = "gumbel"\nmean = 1.0\ncov = 0.3\n'
    )
    product = (
        HEAD.replace("R >= E", "R >= E * X")
        + LOGNORMAL
        + '\n[variables.X]\nfamily = "gumbel"\nmean = 1.0\ncov = 0.3\n'
    )
    one, other = solved(tmp_path, given), solved(tmp_path, product)
    np.testing.assert_allclose(present(one), present(other), rtol=1e-9)
    assert one.factors["optimal"].iloc[0] == pytest.approx(other.factors["optimal"].iloc[0], abs=1e-7)
    assert list(one.situations.filter(like="alpha_").columns) == ["alpha_R", "alpha_E", "alpha_X"]


def test_the_scatter_may_depend_on_another_variable(tmp_path):
    """No closed form: probability by quadrature over the variable on which the scatter depends."""
    from scipy.special import ndtr, ndtri

    text = (
        HEAD
        + NORMAL.replace("cov = 0.2", 'sd = "0.12 * E_k * X"')
        + '\n[variables.X]\nfamily = "lognormal"\nmean = 1.0\ncov = 0.25\n'
    )
    found = present(solved(tmp_path, text))
    z, w = np.polynomial.hermite_e.hermegauss(80)
    s = np.sqrt(np.log1p(0.25**2))
    x = np.exp(-0.5 * s * s + s * z)
    p = np.sum(w / np.sqrt(2.0 * np.pi) * ndtr(-(2.4 - 0.6) / np.sqrt(0.24**2 + (0.12 * x) ** 2)))
    # FORM of a surface that is nearly plane there
    np.testing.assert_allclose(found, -ndtri(p), atol=0.03)
    assert np.all(found < 1.8 / np.hypot(0.24, 0.12))


def test_a_size_that_moves_correlated_variables(tmp_path):
    """The scatter of R is given in kN, so its cov falls with the size, and with it the coefficient in normal space."""
    text = (
        HEAD
        + LOGNORMAL.replace("cov = 0.1", 'sd = "0.2 kN"').replace("E_k = {", "E_k = {")
        + '\n[correlations]\n"R, E" = 0.5\n'
    )
    result = solved(tmp_path, text)
    beta = result.situations["beta_optimal"].to_numpy()
    gamma = result.factors["optimal"].iloc[0]
    e = np.array([1.0, 2.0, 3.5])
    v = 0.2 / (1.2 * gamma * e)
    zr, ze = np.sqrt(np.log1p(v * v)), np.sqrt(np.log1p(0.04))
    rho_log = np.log1p(0.5 * v * 0.2) / (zr * ze)
    medians = (1.2 * gamma / np.sqrt(1.0 + v * v)) / (0.6 / np.sqrt(1.04))
    exact = np.log(medians) / np.sqrt(zr**2 + ze**2 - 2.0 * rho_log * zr * ze)
    np.testing.assert_allclose(beta, exact, rtol=1e-6)
    # An optimum: the objective rises on both sides of it.
    assert np.sum((exact - 3.8) ** 2) == pytest.approx(
        result.to_dict()["objective"]["optimal"] * 3.0, rel=1e-6
    )


@pytest.mark.parametrize(
    ("pairs", "told"),
    [
        ('"R, E" = 0.99', "'R, E' = 0.99 is out of reach of these two distributions"),
        ('"R, E" = -0.9\n"R, X" = 0.9\n"E, X" = 0.9', "the matrix of R, E, X is not positive definite"),
    ],
)
def test_what_cannot_be_is_told_with_its_line(tmp_path, pairs, told):
    text = (
        HEAD.replace("R >= E", "R >= E * X")
        + NORMAL.replace('family = "normal"\nmean = "0.6', 'family = "exponential"\nmean = "0.6').replace(
            "cov = 0.2", ""
        )
        + '\n[variables.X]\nfamily = "normal"\nmean = 1.0\ncov = 0.1\n'
        + f"\n[correlations]\n{pairs}\n"
    )
    with pytest.raises(InputError, match=told) as caught:
        solved(tmp_path, text)
    (problem,) = caught.value.problems
    assert text.splitlines()[problem.line - 1] == pairs.splitlines()[0]
    assert problem.file is not None


def test_estimated_from_paired_records(tmp_path):
    """Against numpy's coefficient of the rows."""
    rng = np.random.default_rng(7)
    a = rng.normal(size=30)
    b = 0.6 * a + 0.8 * rng.normal(size=30)
    rows = [f"{300 + 20 * x:.2f},{200 + 4 * y:.3f}" for x, y in zip(a, b, strict=True)]
    (tmp_path / "sheet.csv").write_text("f_y,E\n" + "\n".join(rows) + "\n", encoding="utf-8")
    records = "".join(
        f'\n[records.{n}]\nfile = "sheet.csv"\ncolumn = "{n}"\n'
        f'\n[variables.{n}]\nrecords = "{n}"\nfamily = "normal"\nmay_be_negative = true\n'
        for n in ("f_y", "E")
    )
    text = (
        HEAD.replace("R >= E", "R_d * f_y >= E * E_k").replace(
            'R_d >= gamma * E_k"', 'R_d * 200 >= gamma * 200 * E_k"'
        )
        + records
        + '\n[correlations]\n"f_y, E" = { from_records = true }\n'
    )
    result = solved(tmp_path, text)
    numbers = np.array([r.split(",") for r in rows], dtype=float)
    (pair,) = result.study.correlations
    assert pair.estimate.n == 30
    assert pair.pair.coefficient == pytest.approx(np.corrcoef(numbers.T)[0, 1], abs=1e-12)
    assert pair.estimate.lower < pair.pair.coefficient < pair.estimate.upper


def test_variables_in_a_circle_are_told_once(tmp_path):
    text = HEAD + NORMAL.replace('"1.2 * R_d"', '"1.2 * E"').replace('"0.6 * E_k"', '"0.6 * R"')
    with pytest.raises(InputError, match="depends on itself through 'E'") as caught:
        solved(tmp_path, text)
    assert len(caught.value.problems) == 1


def test_section_modulus_of_two_tolerance_controlled_dimensions(tmp_path):
    """Against plain Monte Carlo by numpy and scipy of the same truncated, rank-correlated dimensions.

    First order: V(W)^2 = V_b^2 + 4 V_h^2 + 4 rho V_b V_h for W = b h^2 / 6.
    """
    from scipy.special import ndtr, ndtri

    text = """\
format = 1
study = { title = "Section", reference_period = 50, seed = 1 }
target = { beta = 3.0 }
[variables]
b = { family = "truncated_normal", mean = "45 mm", sd = "1.5 mm", lower = "42 mm", upper = "48 mm" }
h = { family = "truncated_normal", mean = "120 mm", sd = "4 mm", lower = "112 mm", upper = "128 mm" }
f = { family = "lognormal", mean = "30 MPa", cov = 0.1 }
M = { family = "gumbel", mean = "1.75 kN*m", cov = 0.12 }
[correlations]
"b, h" = { coefficient = 0.8, kind = "rank" }
[rules.bending]
limit_state = "f * b * h**2 / 6 >= M"
[factors]
gamma = 1.0
[verification]
cov = 0.005
samples = 1000000
"""
    v = solved(tmp_path, text).verifications["proposed"]
    rng = np.random.default_rng(11)
    n = 2_000_000
    rho = 2.0 * np.sin(np.pi * 0.8 / 6.0)
    z1 = rng.standard_normal(n)
    z2 = rho * z1 + np.sqrt(1.0 - rho * rho) * rng.standard_normal(n)

    def truncated(z, mean, sd, half):
        """The parent is symmetric; its scale by the closed form of the variance."""
        from scipy.optimize import brentq

        def spread(scale):
            a = half / scale
            density = np.exp(-0.5 * a * a) / np.sqrt(2.0 * np.pi)
            return scale * np.sqrt(1.0 - 2.0 * a * density / (2.0 * ndtr(a) - 1.0)) - sd

        scale = brentq(spread, sd, 20.0 * sd)
        low = ndtr(-half / scale)
        return mean + scale * ndtri(low + ndtr(z) * (1.0 - 2.0 * low))

    w = truncated(z1, 0.045, 0.0015, 0.003) * truncated(z2, 0.12, 0.004, 0.008) ** 2 / 6.0
    s = np.sqrt(np.log1p(0.01))
    f = 30e6 * np.exp(-0.5 * s * s + s * rng.standard_normal(n))
    scale = 0.12 * 1750.0 * np.sqrt(6.0) / np.pi
    m = 1750.0 - np.euler_gamma * scale - scale * np.log(rng.exponential(size=n))
    p = np.mean(f * w <= m)
    assert 3e-4 < p < 5e-2
    error = np.sqrt((1.0 - p) / (n * p))
    assert ndtr(-v.simulated[0]) == pytest.approx(p, rel=3.0 * np.hypot(error, 0.005))
    first_order = np.sqrt((1.5 / 45) ** 2 + 4 * (4 / 120) ** 2 + 4 * 0.8 * (1.5 / 45) * (4 / 120))
    assert np.std(w) / np.mean(w) == pytest.approx(first_order, rel=0.03)
