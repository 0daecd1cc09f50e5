"""Resistance factor from tests in the North American form."""

import math

import numpy as np
import pytest
from scipy import stats

from calibrate.errors import InputError
from calibrate.resistance import (
    FORMATS,
    LoadStatistics,
    Part,
    correction_for_tests,
    form_factor,
    format_named,
    north_american_factor,
    professional_part,
)

MATERIAL, FABRICATION, PROFESSIONAL = Part(1.10, 0.10), Part(1.00, 0.05), Part(1.00, 0.10)


def factor(n, name, part=PROFESSIONAL, **options):
    return north_american_factor(
        part, n, material=MATERIAL, fabrication=FABRICATION, design_format=format_named(name), **options
    )


def test_correction_for_the_number_of_tests():
    # AISI S100 (formula from memory), C_P recomputed by separate code to four digits; 5.7 for three tests as printed.
    n = [3, 4, 5, 6, 7, 8, 9, 10, 12, 15, 20, 30, 50, 100]
    c_p = [
        5.7,
        3.75,
        2.4,
        1.9444,
        1.7143,
        1.575,
        1.4815,
        1.4143,
        1.3241,
        1.2444,
        1.1735,
        1.1099,
        1.0634,
        1.0308,
    ]
    assert correction_for_tests(n) == pytest.approx(c_p, abs=1e-4)
    # It is the variance of the predictive t distribution, for a sample of unit variance.
    assert correction_for_tests(9) == pytest.approx(stats.t(8).var() * (1 + 1 / 9), rel=1e-12)


def test_coefficients_follow_from_the_loads():
    # Load factors, ratios and load statistics of AISI S100 and of ANSI A58 / NBS SP 577 from memory; C_phi and V_Q
    # recomputed by separate code to six digits; printed 1.52, 1.42 and 0.21.
    lrfd, lsd = FORMATS["LRFD members"], FORMATS["LSD members"]
    assert lrfd.coefficients("derived") == pytest.approx((1.520661, 0.207339), abs=1e-6)
    assert lsd.coefficients("derived") == pytest.approx((1.419753, 0.186991), abs=1e-6)
    assert lrfd.coefficients("printed") == (1.52, 0.21)
    assert lsd.coefficients("printed") == (1.42, 0.21)
    assert [f.target for f in FORMATS.values()] == [2.5, 3.5, 3.0, 4.0]
    for f in FORMATS.values():
        assert f.coefficients("derived")[0] == pytest.approx(f.printed_c_phi, abs=0.005)


@pytest.mark.parametrize(
    ("name", "values"),
    [
        ("LRFD members", (0.719935, 0.776567, 0.859918, 0.872446)),
        ("LSD members", (0.568263, 0.622318, 0.703309, 0.715622)),
        ("LRFD connections", (0.513944, 0.571421, 0.659091, 0.672573)),
        ("LSD connections", (0.405669, 0.457919, 0.539057, 0.551677)),
    ],
)
def test_factor_for_one_set_of_statistics(name, values):
    # Computed for this test by separate code with M 1.10, 0.10; F 1.00, 0.05; P 1.00, 0.10; V_Q 0.21.
    found = [factor(n, name).phi for n in (3, 4, 10, 30)]
    assert found == pytest.approx(values, abs=1e-6)


def test_every_number_of_the_factor_is_shown_and_they_agree():
    f = factor(8, "LRFD connections", Part(1.05, 0.12), coefficients="derived")
    v = math.sqrt(f.material.cov**2 + f.fabrication.cov**2 + f.c_p * f.v_p**2 + f.v_q**2)
    assert f.v_total == pytest.approx(v, rel=1e-15)
    assert f.phi == pytest.approx(f.c_phi * 1.10 * 1.05 * math.exp(-3.5 * v), rel=1e-14)
    assert f.phi_other == factor(8, "LRFD connections", Part(1.05, 0.12)).phi
    assert f.doubts == ()


def test_lower_limit_on_the_scatter_of_tests():
    f = factor(6, "LSD members", Part(1.0, 0.02))
    assert (f.v_p, f.floor_governs) == (0.065, True)
    assert f.phi == factor(6, "LSD members", Part(1.0, 0.065)).phi
    assert [d.code for d in f.doubts] == ["floor-on-scatter"]
    assert not factor(6, "LSD members", Part(1.0, 0.065)).floor_governs
    assert factor(6, "LSD members", Part(1.0, 0.02), floor=0.0).v_p == 0.02


def test_form_agrees_when_the_load_is_lognormal_in_sum():
    # Dead load without bias or scatter and of no size: R and L lognormal, so FORM is exact. The form takes V for the
    # sd of the logarithm and the ratio of means for that of medians; corrected for both it must be FORM's factor.
    live = 0.21
    loads = LoadStatistics(
        dead_factor=1.2,
        live_factor=1.6,
        dead_to_live=0.0,
        dead_bias=1.0,
        live_bias=1.0,
        dead_cov=0.1,
        live_cov=live,
    )
    f = factor(12, "LRFD members")
    v_r = math.sqrt(f.v_total**2 - f.v_q**2)
    exact = form_factor(1.10, v_r, 2.5, loads).phi
    spread = math.hypot(*(math.sqrt(math.log1p(v * v)) for v in (v_r, live)))
    corrected = 1.10 * 1.6 * math.sqrt((1 + live**2) / (1 + v_r**2)) * math.exp(-2.5 * spread)
    assert exact == pytest.approx(corrected, rel=1e-8)
    # Uncorrected the first-order form is near: within 3 % here.
    assert 1.6 * 1.10 * math.exp(-2.5 * f.v_total) == pytest.approx(float(exact), rel=0.03)


def test_professional_part_is_mean_and_scatter_of_the_ratios():
    delta = np.array([0.93, 1.04, 1.10, 0.99, 1.21])
    part = professional_part(delta)
    assert part.mean == pytest.approx(1.054)
    assert part.cov == pytest.approx(stats.variation(delta, ddof=1), rel=1e-14)


def test_wrong_input_is_refused():
    with pytest.raises(InputError, match="at least 3 tests; got 2"):
        factor(2, "LSD members")
    with pytest.raises(InputError, match=r"whole number of at least 3 tests; got 4\.5"):
        correction_for_tests([4, 4.5])
    with pytest.raises(
        InputError, match=r"Unknown design format 'LRFD member'\. Did you mean 'LRFD members'\?"
    ):
        format_named("LRFD member")
    with pytest.raises(InputError, match="'printed' or 'derived'; got 'print'"):
        factor(5, "LSD members", coefficients="print")
    with pytest.raises(InputError, match="mean over nominal is 0"):
        Part(0.0, 0.1)
    with pytest.raises(InputError, match="at least 3 tests are needed"):
        professional_part([1.0, 1.1])
