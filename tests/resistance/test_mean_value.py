"""Closed-form resistance factors of bias statistics, and FORM beside them."""

import math

import numpy as np
import pytest
from scipy import integrate, stats

from calibrate.errors import InputError
from calibrate.resistance import (
    BiasStatistics,
    LoadStatistics,
    form_factor,
    linearised_factor,
    lognormal_factor,
    mean_value_factors,
)

PILES = {
    "dead_factor": 1.25,
    "live_factor": 1.75,
    "dead_bias": 1.05,
    "live_bias": 1.15,
    "dead_cov": 0.1,
    "live_cov": 0.2,
}


def test_deep_foundations():
    # NCHRP Report 507 (2004): dynamic measurement with signal matching, beginning of restrike, bias 1.158, V 0.339,
    # lognormal, dead-to-live ratio 2; printed FORM factors 0.65 and 0.51 for beta 2.33 and 3.00 (from memory; FORM
    # recomputed by separate code: 0.6510, 0.5171, closed form 0.5828, 0.4467). Page 37 of the report says that FORM is
    # "approximately 10 % higher".
    loads = LoadStatistics(dead_to_live=2.0, **PILES)
    found = mean_value_factors(1.158, 0.339, [2.33, 3.00], loads)
    assert found.form.phi == pytest.approx([0.65, 0.51], abs=0.01)
    assert found.form.phi == pytest.approx([0.6510, 0.5171], abs=6e-5)
    assert found.lognormal == pytest.approx([0.5828, 0.4467], abs=6e-5)
    assert found.form.phi / found.lognormal == pytest.approx([1.12, 1.16], abs=0.005)
    assert (found.beta > [2.33, 3.00]).all()
    assert found.load_cov == pytest.approx(math.hypot(0.1, 0.2))
    (doubt,) = found.doubts
    assert doubt.code == "closed-form-differs"
    assert "16% above" in doubt.message
    assert "without weights" in doubt.message


def test_statistics_of_logarithms_are_not_those_converted_from_moments():
    # NCHRP Report 507, page 37: 16 H-piles in clay, normal fit mean 0.901, sd 0.374, lognormal fit -0.197, 0.464: the
    # latter is from the logarithms of the data; the moments would give 0.399.
    published = BiasStatistics(16, 0.901, 0.374, -0.197, 0.464)
    assert published.log_sd_by_moments == pytest.approx(0.399, abs=5e-4)
    assert published.by_moments == pytest.approx((0.901, 0.374 / 0.901))
    bias, cov = published.by_logarithms
    assert bias == pytest.approx(stats.lognorm(0.464, scale=math.exp(-0.197)).mean(), rel=1e-12)
    assert cov == pytest.approx(math.sqrt(math.expm1(0.464**2)), rel=1e-12)
    skew = np.array([0.2, 0.8, 0.9, 1.0, 1.1, 1.2])
    found = BiasStatistics.of(skew)
    assert (found.log_mean, found.log_sd) == pytest.approx((np.log(skew).mean(), np.log(skew).std(ddof=1)))
    assert found.log_sd > 1.3 * found.log_sd_by_moments


def test_linearised_factor_of_steel():
    # Ravindra and Galambos 1978 (from memory): compact beams 0.86, tension yield 0.88 printed; third row arithmetic.
    found = linearised_factor([1.07, 1.05, 0.88], [0.13, 0.11, 0.18], [3.0, 3.0, 4.5])
    assert found == pytest.approx([0.863, 0.876, 0.564], abs=0.0005)
    assert found[:2] == pytest.approx([0.86, 0.88], abs=0.005)


def test_lognormal_factor_is_exact_for_one_lognormal_load():
    loads = LoadStatistics(dead_to_live=0.0, **PILES)
    closed = lognormal_factor(1.1, [0.1, 0.3], 3.0, loads, "weighted")
    assert form_factor(1.1, [0.1, 0.3], 3.0, loads).phi == pytest.approx(closed, rel=1e-8)
    # By the definition of beta for the difference of two logarithms.
    s_r, s_q = math.sqrt(math.log1p(0.3**2)), math.sqrt(math.log1p(0.2**2))
    medians = math.log(1.1 * 1.75 / closed[1]) - s_r**2 / 2 - (math.log(1.15) - s_q**2 / 2)
    assert medians / math.hypot(s_r, s_q) == pytest.approx(3.0, rel=1e-12)


def test_form_factor_with_normal_dead_and_gumbel_live_load():
    loads = LoadStatistics(
        dead_factor=1.2, live_factor=1.6, dead_to_live=[0.2, 0.5, 1.0], dead_bias=1.05, live_bias=1.0, dead_cov=0.1,
        live_cov=0.25,
    )  # fmt: skip
    found = form_factor(1.07, 0.13, 2.6, loads, dead="normal", live="gumbel")
    assert list(found.status) == ["converged"] * 3
    assert found.alpha_resistance**2 + found.alpha_dead**2 + found.alpha_live**2 == pytest.approx(1.0)
    # Witness: the probability of failure by quadrature is near the first-order one, Phi(-2.6) within 10 %.
    log_sd = math.sqrt(math.log1p(0.13**2))
    for ratio, phi in zip([0.2, 0.5, 1.0], found.phi, strict=True):
        median = 1.07 * (1.2 * ratio + 1.6) / phi / math.sqrt(1 + 0.13**2)
        scale = 0.25 * math.sqrt(6) / math.pi
        live = stats.gumbel_r(1.0 - np.euler_gamma * scale, scale)

        def failing(q, u, m=median, r=ratio, live=live):
            return (
                live.sf(m * math.exp(log_sd * q) - r * (1.05 + 0.105 * u))
                * stats.norm.pdf(q)
                * stats.norm.pdf(u)
            )

        p, _ = integrate.dblquad(failing, -6, 6, -7, 7, epsabs=1e-7)
        assert p == pytest.approx(stats.norm.sf(2.6), rel=0.10)


def test_batch_equals_single_cases():
    ratios = np.array([[0.5], [2.0], [4.0]])
    loads = LoadStatistics(dead_to_live=ratios, **PILES)
    bias = np.array([0.9, 1.2])
    batch = form_factor(bias, 0.3, 2.5, loads)
    assert batch.phi.shape == (3, 2)
    for i, ratio in enumerate(ratios[:, 0]):
        for j, b in enumerate(bias):
            single = form_factor(b, 0.3, 2.5, LoadStatistics(dead_to_live=ratio, **PILES))
            assert batch.phi[i, j] == pytest.approx(float(single.phi), rel=1e-9)
    # The factor is proportional to the bias.
    assert batch.phi[:, 1] / batch.phi[:, 0] == pytest.approx(1.2 / 0.9, rel=1e-8)


def test_loads_are_those_written_out():
    loads = LoadStatistics(dead_to_live=2.0, **PILES)
    assert loads.factored == pytest.approx(4.25)
    assert loads.mean == pytest.approx(3.25)
    assert loads.calibration_coefficient == pytest.approx(4.25 / 3.25)
    assert loads.cov == pytest.approx(math.sqrt(0.21**2 + 0.23**2) / 3.25)


def test_wrong_input_is_refused():
    loads = LoadStatistics(dead_to_live=2.0, **PILES)
    with pytest.raises(
        InputError, match=r"bias of the resistance .* got -1(.|\n)*scatter of the resistance .* got -0\.1"
    ):
        lognormal_factor(-1.0, -0.1, 3.0, loads)
    with pytest.raises(InputError, match="do not broadcast"):
        form_factor([1.0, 1.1], [0.1, 0.2, 0.3], 3.0, loads)
    with pytest.raises(InputError, match=r"got 'weight'\. Did you mean 'weighted'"):
        lognormal_factor(1.0, 0.1, 3.0, loads, "weight")
    with pytest.raises(InputError, match=r"Dead factor: must be finite and above zero; got 0(.|\n)*Live cov"):
        LoadStatistics(dead_to_live=2.0, **{**PILES, "dead_factor": 0, "live_cov": -1.0})
    with pytest.raises(InputError, match=r"between 0 and 1; got 1\.5"):
        linearised_factor(1.0, 0.1, 3.0, alpha=1.5)
