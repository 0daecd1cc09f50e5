"""Verification in studies: against exact indices, on every set of factors, and as the index that is calibrated."""

import json

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from calibrate.errors import InputError
from calibrate.study import read_study, run
from calibrate.study.export import table_files

# Steel member of the EN 1990 kind: exact indices by two-dimensional Gauss-Legendre quadrature, expression 6.10.
CHI = (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8)
FORM = (3.2412, 3.5562, 3.6924, 3.6504, 3.5509, 3.4442, 3.3444, 3.2548)
EXACT = (3.2321, 3.5112, 3.6394, 3.6201, 3.5356, 3.4370, 3.3418, 3.2550)
STEEL = """\
format = 1
study = { title = "Steel member", reference_period = 50, seed = 5 }
target = { beta = 3.8 }

[variables]
f_y = { family = "lognormal", mean = "1 / (1 - 2 * 0.08)", cov = 0.08 }
theta_R = { family = "lognormal", mean = 1.0, cov = 0.05 }
theta_E = { family = "lognormal", mean = 1.0, cov = 0.10 }
G = { family = "normal", mean = "1 - chi", cov = 0.1 }
Q = { family = "gumbel", mean = "0.6 * chi", cov = 0.35 }

[situations.axes]
chi = { from = 0.1, to = 0.8, count = 8 }

[rules.member]
design_check = "A / gamma_M >= 1.35 * (1 - chi) + 1.5 * chi"
sizes = "A"
limit_state = "theta_R * A * f_y >= theta_E * (G + Q)"

[factors]
gamma_M = { present = 1.0, lower = 0.9, upper = 1.5, step = 0.05 }
"""


def read(tmp_path, text):
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    return read_study(path)


def exact_steel(gamma_m, chi):
    """Exact by quadrature: theta_R f_y / theta_E is one lognormal variable, G a normal one, Q is integrated."""
    z, w = np.polynomial.legendre.leggauss(200)
    u, w = 10.0 * z, 10.0 * w * np.exp(-0.5 * (10.0 * z) ** 2) / np.sqrt(2.0 * np.pi)
    zetas = np.log1p(np.array([0.08, 0.05, 0.10]) ** 2)
    median = 1.0 / (1.0 - 0.16) / np.exp(0.5 * (zetas[0] + zetas[1] - zetas[2]))
    area = gamma_m * (1.35 * (1.0 - chi) + 1.5 * chi)
    r = area * median * np.exp(np.sqrt(zetas.sum()) * u)
    g = (1.0 - chi) * (1.0 + 0.1 * u)
    scale = 0.35 * 0.6 * chi * np.sqrt(6.0) / np.pi
    location = 0.6 * chi - np.euler_gamma * scale
    with np.errstate(over="ignore"):
        exceeded = -np.expm1(-np.exp(-(r[:, None] - g[None, :] - location) / scale))
    return float(-ndtri(w @ exceeded @ w))


def test_the_simulated_index_is_the_exact_one(tmp_path):
    text = STEEL + '\n[verification]\nsituations = "all"\non = ["present", "proposed"]\n'
    result = run(read(tmp_path, text))
    v = result.verifications["present"]
    np.testing.assert_allclose(v.form, FORM, atol=1e-4)
    assert v.is_simulated.all()
    # Seven of eight 95 % intervals at least, and all of twice the width.
    assert np.count_nonzero((v.lower <= EXACT) & (v.upper >= EXACT)) >= 7
    assert np.all(np.abs(v.simulated - EXACT) <= (v.upper - v.lower))
    np.testing.assert_allclose(v.sorm, EXACT, atol=0.006)
    assert np.all(v.cov <= 0.0201)
    assert list(result.verification["factors"].unique()) == ["present", "proposed"]


def test_by_default_the_situations_that_matter_are_simulated(tmp_path):
    result = run(read(tmp_path, STEEL.replace("count = 8", "count = 80")))
    v = result.verifications["proposed"]
    beta = result.situations["beta_proposed"].to_numpy()
    simulated = v.is_simulated
    assert simulated[np.argmin(beta)]
    assert simulated[np.argmax(beta)]
    assert simulated[np.argmax(np.abs(v.sorm - v.form))]
    assert 8 <= np.count_nonzero(simulated) < 20
    assert np.isfinite(v.sorm).all()
    content = result.to_dict()["verification"]["proposed"]
    assert content["simulated"] == np.count_nonzero(simulated)
    assert content["method"] == "importance sampling"
    assert content["largest_difference"]["rule"] == "member"


def test_nothing_depends_on_workers(tmp_path):
    study = read(tmp_path, STEEL)
    one, two = run(study), run(study, workers=2)
    files, others = table_files(one), table_files(two)
    for name in files:
        a, b = files[name].decode(), others[name].decode()
        if name == "result.json":
            a, b = ({**json.loads(text), "provenance": None} for text in (a, b))
        assert a == b, name


def test_second_order_alone_and_nothing_at_all(tmp_path):
    by_curvature = run(read(tmp_path, STEEL + '\n[verification]\nmethod = "sorm"\n'))
    v = by_curvature.verifications["proposed"]
    assert not v.is_simulated.any()
    assert set(v.basis) == {"second order"}
    assert v.samples.sum() == 0
    nothing = run(read(tmp_path, STEEL + '\n[verification]\nmethod = "none"\n'))
    assert nothing.verifications == {}
    assert "verification.csv" not in table_files(nothing)
    assert nothing.to_dict()["verification"] == {}


def test_factors_on_the_verified_index(tmp_path):
    """FORM is off by 0.05 here; on the verified index the exact index is the target."""
    one = STEEL.replace("chi = { from = 0.1, to = 0.8, count = 8 }", "chi = [0.3]").replace(
        ", step = 0.05", ""
    )
    assert exact_steel(1.0, 0.3) == pytest.approx(EXACT[2], abs=5e-5)
    on_form = run(read(tmp_path, one)).factors["optimal"].iloc[0]
    more = '\n[objective]\nindex = "verified"\n[verification]\ncov = 0.005\nsamples = 2000000\n'
    result = run(read(tmp_path, one + more))
    on_verified = result.factors["optimal"].iloc[0]
    assert exact_steel(on_form, 0.3) < 3.8 - 0.04
    # The half width of the 95 % interval of beta at a cov of 0.5 % is about 0.0025.
    assert exact_steel(on_verified, 0.3) == pytest.approx(3.8, abs=0.004)
    assert result.to_dict()["index"] == "verified"
    v = result.verifications["proposed"]
    # The standard deviation of beta at a cov of 0.5 % is 0.0013; both come from the same stream.
    np.testing.assert_allclose(v.verified, result.situations["beta_proposed"], atol=1e-3)
    assert not [d for d in result.doubts if d.code == "verified-index-unsettled"]


def test_several_design_points_are_told_and_covered(tmp_path):
    """g = b - |x|: p_f = 2 Phi(-b); FORM sees one half of it."""
    text = """\
format = 1
study = { title = "Two sides", reference_period = 50 }
target = { beta = 3.0 }
variables.x = { family = "normal", mean = 0.0, sd = 1.0 }
rules.two = { limit_state = "3.2 >= abs(x)" }
factors.gamma = 1.0
"""
    result = run(read(tmp_path, text))
    v = result.verifications["proposed"]
    assert v.points[0] == 2
    assert list(result.situations["status"]) == ["several design points"]
    exact = -ndtri(2.0 * ndtr(-3.2))
    assert v.series[0] == pytest.approx(exact, abs=1e-9)
    assert v.lower[0] <= exact <= v.upper[0]
    codes = {d.code for d in result.doubts}
    assert {"form-error", "several-design-points"} <= codes


def test_a_paraboloid_that_is_no_guide_is_told(tmp_path):
    """Cubes of two normal variables (Choi, Grandhi and Canfield 2007): the second order is bad, the simulation is not.

    p_f 5.70e-3 by 4e6 samples of plain Monte Carlo (mean of the second variable 9.9).
    """
    text = """\
format = 1
study = { title = "Cubes", reference_period = 50, seed = 3 }
target = { beta = 3.0 }
variables.x = { family = "normal", mean = 10.0, sd = 5.0, may_be_negative = true }
variables.y = { family = "normal", mean = 9.9, sd = 5.0, may_be_negative = true }
rules.two = { limit_state = "x**3 + y**3 >= 18" }
factors.gamma = 1.0
"""
    result = run(read(tmp_path, text))
    v = result.verifications["proposed"]
    (doubt,) = [d for d in result.doubts if d.code == "second-order-limit"]
    assert "no guide" in doubt.message
    assert v.form[0] == pytest.approx(2.22599, abs=1e-4)
    assert not v.sorm_sound[0]
    assert ndtr(-v.simulated[0]) == pytest.approx(5.70e-3, rel=0.06)


@pytest.mark.parametrize(
    ("more", "told"),
    [
        ('[verification]\nmethod = "importance"', "Did you mean 'importance sampling'"),
        ("[verification]\ncov = 0", "verification.cov"),
        ('[verification]\non = "initial"', "verification.on"),
        ("[verification]\nsample = 5", "Did you mean 'samples'"),
        (
            '[objective]\nindex = "verified"\n[verification]\nmethod = "none"',
            'is "none", but the objective asks',
        ),
        (
            '[objective]\nindex = "verified"\n[verification]\nsituations = "chosen"',
            "rests on the verified index",
        ),
        ('[objective]\nindex = "exact"', "objective.index"),
    ],
)
def test_wrong_input(tmp_path, more, told):
    with pytest.raises(InputError) as caught:
        read(tmp_path, f"{STEEL}\n{more}\n")
    assert told in str(caught.value)
    assert len(caught.value.problems) == 1
