"""Annex D.8 against a worked example, limits in closed form, and simulated series of known truth."""

import math

import numpy as np
import pytest
from scipy import special, stats

from calibrate.engine import stream
from calibrate.errors import InputError
from calibrate.fitting.characteristic import EN_1990_TABLE_D1, EN_1990_TABLE_D2
from calibrate.resistance import (
    ComponentTests,
    Fractiles,
    annex_d8,
    annex_d8_subsets,
    annex_d8_tail,
    fractile_factors,
    predicted_scatter,
)

# Twelve invented tests; the expected numbers were computed for the formulas of EN 1990:2002, D.8.2 and D.8.3 (from
# memory) with 30 digits by separate code, and once more in double precision.
PREDICTED = np.array([102.4, 118.9, 131.5, 145.0, 150.2, 163.7, 178.1, 185.6, 199.3, 214.8, 226.0, 241.7])
EXPERIMENTAL = np.array([110.3, 121.6, 146.9, 150.8, 169.4, 171.2, 201.9, 196.0, 224.7, 229.5, 257.6, 261.2])
COVS = {"yield_strength": 0.07, "geometry": 0.03}
DESIGN_TAIL = float(special.ndtr(-3.04))


def example(**more):
    return ComponentTests(EXPERIMENTAL, PREDICTED, **more)


def test_the_steps_of_a_worked_example():
    found = annex_d8(example(), COVS)
    expected = {
        "b": 1.0918925971,
        "v_delta": 0.0379737115,
        "v_rt": 0.0761577311,
        "v_r": 0.0851750124,
        "v_r_first_order": 0.0850999575,
        "q_rt": 0.0760476479,
        "q_delta": 0.0379600327,
        "q": 0.0850211350,
        "alpha_rt": 0.8944558072,
        "alpha_delta": 0.4464776041,
        "r_k": 0.9427664535,
        "r_d": 0.8255104686,
        "gamma_m": 1.1420405790,
    }
    assert {name: getattr(found, name) for name in expected} == pytest.approx(expected, rel=1e-8)
    assert found.factors.k_n == pytest.approx(1.8692161830, rel=1e-8)
    assert found.factors.k_d_n == pytest.approx(4.0869530392, rel=1e-8)
    assert (found.factors.k_infinity, found.factors.k_d_infinity) == (1.64, 3.04)
    assert not found.many
    assert found.doubts == ()


def test_the_factor_against_nominal_properties_of_the_worked_example():
    # Mean over nominal yield strength of 1.00, 1.20 and 1.25.
    found = annex_d8(example(), COVS, nominal=1.0 / np.array([1.00, 1.20, 1.25]))
    np.testing.assert_allclose(found.gamma_m_star, [1.2113716762, 1.0094763968, 0.9690973409], rtol=1e-8)
    assert annex_d8(example(), COVS, nominal=0.8).gamma_m_star.shape == ()
    assert np.isnan(annex_d8(example(), COVS).gamma_m_star)


def test_the_formulas_for_large_samples_of_the_worked_example():
    large = annex_d8(example(), COVS).large
    assert large.r_k == pytest.approx(0.9463560184, rel=1e-8)
    assert large.r_d == pytest.approx(0.8401573957, rel=1e-8)
    assert large.gamma_m == pytest.approx(1.1264032469, rel=1e-8)


def test_the_design_value_with_a_fractile_of_one_in_a_thousand():
    # The printed finite-n factors follow t(0.999) and not t(Phi(3.04)); the difference is wanted, not rounded away.
    beta = -float(special.ndtri(0.001)) / 0.8
    found = annex_d8(example(), COVS, fractiles=Fractiles(target_beta=beta))
    assert found.factors.k_d_n == pytest.approx(4.1890416540, rel=1e-8)
    plain = annex_d8(example(), COVS)
    mixed = plain.b * math.exp(
        -3.04 * plain.alpha_rt * plain.q_rt
        - found.factors.k_d_n * plain.alpha_delta * plain.q_delta
        - 0.5 * plain.q**2
    )
    assert mixed == pytest.approx(0.8240833814, rel=1e-8)
    assert plain.r_k / mixed == pytest.approx(1.1440182816, rel=1e-8)


def repeated(times):
    return ComponentTests(np.tile(EXPERIMENTAL, times), np.tile(PREDICTED, times))


def test_more_than_a_hundred_tests_take_the_formulas_for_large_samples():
    assert not annex_d8(repeated(8), COVS).many
    found = annex_d8(repeated(9), COVS)
    assert found.many
    assert found.r_d == found.large.r_d
    hand = found.b * math.exp(-3.04 * found.q - 0.5 * found.q**2)
    assert found.r_d == pytest.approx(hand, rel=1e-14)


def test_both_formulas_meet_for_endless_series():
    # With V_rt of the lognormal product the alphas are those of a unit vector, and k_n tends to 1.6449 and 3.04.
    fractiles = Fractiles(k_infinity=-float(special.ndtri(0.05)))
    found = annex_d8(repeated(20_000), COVS, propagation="lognormal_product", fractiles=fractiles)
    assert found.alpha_rt**2 + found.alpha_delta**2 == pytest.approx(1.0, rel=1e-13)
    assert found.small.r_k == pytest.approx(found.large.r_k, rel=2e-6)
    assert found.small.r_d == pytest.approx(found.large.r_d, rel=4e-6)


def test_lognormal_factor_against_its_closed_form():
    # gamma = exp(alpha_R beta V - 1.645 V) with logarithmic scatter, for 5 % (fib Bulletin 80, from memory).
    fractiles = Fractiles(k_infinity=1.645)
    for v, printed in ((0.05, 1.072240), (0.10, 1.149699), (0.15, 1.232753), (0.20, 1.321807)):
        # Tests with next to no errors: all scatter is that of the one variable.
        tests = ComponentTests(np.exp(1e-9 * np.tile([1.0, -1.0], 60)), np.ones(120))
        found = annex_d8(
            tests, {"r": math.sqrt(math.expm1(v**2))}, propagation="lognormal_product", fractiles=fractiles
        )
        assert found.gamma_m == pytest.approx(printed, abs=1e-6)


# The scatter of the prediction.


def test_the_sum_and_the_lognormal_product_by_hand():
    found = predicted_scatter(COVS)
    assert found.from_sum == pytest.approx(math.sqrt(0.07**2 + 0.03**2), rel=1e-14)
    assert found.from_lognormal_product == pytest.approx(math.sqrt(1.0049 * 1.0009 - 1.0), rel=1e-12)
    assert found.v_rt == found.from_sum
    assert math.isnan(found.from_gradient)


def test_the_sum_against_published_resistances():
    # Eurocode 2 Commentary (European Concrete Platform, 2008, from memory): model, geometry and strength of concrete
    # and of reinforcement, whose factors come out as 1.15 x 1.2945 and 1.1542 (printed 1.5 and 1.15).
    for covs, v_r, factor in (
        ((0.05, 0.05, 0.15), 0.165831, 1.294503),
        ((0.025, 0.05, 0.04), 0.068739, 1.154151),
    ):
        found = predicted_scatter(dict(zip(("model", "geometry", "strength"), covs, strict=True))).from_sum
        assert found == pytest.approx(v_r, abs=1e-6)
        assert math.exp(3.04 * found - 1.64 * covs[2]) == pytest.approx(factor, abs=1e-6)


def test_the_lognormal_product_against_simulation():
    covs = {"a": 0.3, "b": 0.2, "c": 0.25}
    rng = stream(1, "product")
    n = 1_000_000
    q = math.sqrt(sum(math.log1p(v**2) for v in covs.values()))
    x = np.ones(n)
    for v in covs.values():
        s = math.sqrt(math.log1p(v**2))
        x *= np.exp(rng.normal(-0.5 * s * s, s, n))
    simulated = x.std() / x.mean()
    found = predicted_scatter(covs, propagation="lognormal_product")
    # Standard error of the estimated cov of a lognormal sample of this size, from blocks.
    error = np.std([b.std() / b.mean() for b in x.reshape(100, -1)]) / 10.0
    assert found.v_rt == pytest.approx(simulated, abs=4 * error)
    # The sum of squares, the first order, is seen to be too small at such scatter.
    assert simulated - found.from_sum > 20 * error
    assert found.v_r(0.0) == pytest.approx(math.sqrt(math.expm1(q * q)), rel=1e-12)


def test_a_gradient_against_simulation_of_a_function_that_is_no_product():
    # Plastic bending of an unequal section: f (b t (h - t) + w (h - 2 t)²/4).
    means = {"f": 300.0, "b": 100.0, "t": 10.0, "h": 200.0, "w": 6.0}
    covs = {"f": 0.02, "b": 0.01, "t": 0.03, "h": 0.008, "w": 0.02}

    def resistance(f, b, t, h, w):
        return f * (b * t * (h - t) + 0.25 * w * (h - 2 * t) ** 2)

    r = resistance(**means)
    f, b, t, h, w = means.values()
    slope = {
        "f": r / f,
        "b": f * t * (h - t),
        "t": f * (b * (h - 2 * t) - w * (h - 2 * t)),
        "h": f * (b * t + 0.5 * w * (h - 2 * t)),
        "w": f * 0.25 * (h - 2 * t) ** 2,
    }
    gradient = {name: slope[name] * covs[name] * means[name] / r for name in means}
    rng = stream(2, "section")
    n = 400_000
    x = resistance(**{name: rng.normal(m, covs[name] * m, n) for name, m in means.items()})
    found = predicted_scatter(covs, gradient)
    assert found.propagation == "gradient"
    simulated = x.std() / x.mean()
    # Of second order are parts in a thousand here; the error of the simulation is 0.11 %.
    assert found.v_rt == pytest.approx(simulated, rel=0.006)
    # Taking the function for a product is wrong by far more.
    assert found.from_sum > 1.1 * simulated


def test_a_gradient_of_a_product_is_the_sum():
    found = predicted_scatter(COVS, {"yield_strength": 0.07, "geometry": -0.03})
    assert found.from_gradient == pytest.approx(found.from_sum, rel=1e-14)
    assert found.v_r(0.1) == pytest.approx(math.sqrt(1.01 * (1 + 0.0058) - 1.0), rel=1e-12)


def test_a_gradient_enters_the_evaluation():
    found = annex_d8(example(), {}, gradient={"yield_strength": 0.07, "geometry": 0.03})
    assert found.v_rt == pytest.approx(0.0761577311, rel=1e-8)
    assert found.alpha_rt**2 + found.alpha_delta**2 == pytest.approx(1.0, rel=1e-13)


def test_no_scatter_of_the_variables_is_doubted():
    found = annex_d8(example(), {})
    assert found.alpha_rt == 0.0
    assert [d.code for d in found.doubts] == ["no-basic-scatter"]


# Factors k.


@pytest.mark.parametrize("n", [4, 5, 6, 8, 10, 20, 30])
def test_factors_from_the_printed_tables(n):
    found = fractile_factors(Fractiles(source="table"), n)
    assert (found.k_n, found.k_d_n) == (EN_1990_TABLE_D1["unknown"][n], EN_1990_TABLE_D2["unknown"][n])
    known = fractile_factors(Fractiles(source="table"), n, known=True)
    assert (known.k_n, known.k_d_n) == (EN_1990_TABLE_D1["known"][n], EN_1990_TABLE_D2["known"][n])
    computed = fractile_factors(Fractiles(), n)
    assert (computed.printed_k_n, computed.printed_k_d_n) == (found.k_n, found.k_d_n)
    # The printed design factors belong to 0.1 %; up to 6 % above those of 0.12 %.
    assert 1.0 < found.k_d_n / computed.k_d_n < 1.06


def test_printed_factors_between_columns_and_beyond():
    found = fractile_factors(Fractiles(source="table"), 12)
    third = (1 / 10 - 1 / 12) / (1 / 10 - 1 / 20)
    assert found.k_d_n == pytest.approx(4.51 + third * (3.64 - 4.51), rel=1e-12)
    assert fractile_factors(Fractiles(source="table"), 10**9).k_d_n == pytest.approx(3.04, abs=1e-6)


def test_known_scatter_takes_the_normal_factor():
    found = annex_d8(example(), COVS, known_v_delta=0.05)
    assert found.factors.known
    assert found.v_delta == 0.05
    assert found.factors.k_n == pytest.approx(1.6448536270 * math.sqrt(13 / 12), rel=1e-9)
    assert found.factors.k_d_n == pytest.approx(3.04 * math.sqrt(13 / 12), rel=1e-9)
    assert found.model.cov == pytest.approx(0.0379737115, rel=1e-8)


def test_the_source_table_changes_the_result_as_it_says():
    formula, table = (annex_d8(example(), COVS, fractiles=Fractiles(source=s)) for s in ("formula", "table"))
    assert table.factors.source == "table"
    change = (table.factors.k_d_n - formula.factors.k_d_n) * formula.alpha_delta * formula.q_delta
    assert table.r_d == pytest.approx(formula.r_d * math.exp(-change), rel=1e-12)


# What the result states, by simulated series of known truth.


def simulated(v_rt, count=500, v_delta=0.08, b=1.1):
    """Return the true probabilities of a resistance below r_k and below r_d for each of many series of 12 tests."""
    q_delta, q_rt = math.sqrt(math.log1p(v_delta**2)), math.sqrt(math.log1p(v_rt**2))
    q = math.hypot(q_delta, q_rt)
    below = np.empty((2, count))
    for i in range(count):
        rng = stream(20, "series", i)
        predicted = rng.uniform(80.0, 120.0, 12)
        errors = np.exp(rng.normal(-0.5 * q_delta**2, q_delta, 12))
        found = annex_d8(ComponentTests(b * predicted * errors, predicted), {"material": v_rt})
        limits = np.log(np.array([found.r_k, found.r_d]) / b)
        below[:, i] = special.ndtr((limits + 0.5 * q * q) / q)
    return below


def test_a_further_specimen_falls_below_with_the_stated_probability_on_average_over_series():
    # With the error as the only scatter D.8 makes the statement of the prediction factor.
    for below, tail in zip(simulated(0.0), (0.05, DESIGN_TAIL), strict=True):
        error = below.std() / math.sqrt(below.size)
        assert below.mean() == pytest.approx(tail, abs=4 * error)
        # The factor for endless series would not do: its statement is off by many standard errors.
    short = stats.t.cdf(-3.04 / math.sqrt(13 / 12), 11)
    assert short > DESIGN_TAIL + 4 * error


def test_the_design_value_lies_above_the_true_fractile_with_the_stated_chance():
    # mean - k s > mu - z sigma has the probability 1 - T(k sqrt(n); n - 1, z sqrt(n)) of non-central t.
    for below, tail in zip(simulated(0.0), (0.05, DESIGN_TAIL), strict=True):
        z = -special.ndtri(tail)
        k = -stats.t.ppf(tail, 11) * math.sqrt(13 / 12)
        chance = 1.0 - stats.nct.cdf(k * math.sqrt(12), 11, z * math.sqrt(12))
        assert np.mean(below > tail) == pytest.approx(chance, abs=4 * math.sqrt(chance * (1 - chance) / 500))
    assert chance == pytest.approx(0.1462, abs=1e-4)


def test_with_scatter_of_the_variables_the_design_value_is_on_the_safe_side_on_average():
    # Splitting k over alpha is no exact prediction any more; it errs to the safe side, here by a third.
    below = simulated(0.06)[1]
    error = below.std() / math.sqrt(below.size)
    assert 0.4 * DESIGN_TAIL < below.mean() < DESIGN_TAIL + 2 * error


# Survivors.

SURVIVED = np.array([False, False, True, False, True, False, True, False, False, False, False, False])


def test_survivors_must_be_asked_for():
    with pytest.raises(InputError, match=r"3 of 12 tests did not fail\. Say how"):
        annex_d8(example(survived=SURVIVED), COVS)


def test_survivors_by_every_way():
    tests = example(survived=SURVIVED)
    censored = annex_d8(tests, COVS, survivors="censored")
    as_failed = annex_d8(tests, COVS, survivors="as_failed")
    left_out = annex_d8(tests, COVS, survivors="leave_out")
    assert as_failed.r_d == annex_d8(example(), COVS).r_d
    assert left_out.r_d == annex_d8(tests.taken(~SURVIVED), COVS).r_d
    assert censored.b > as_failed.b > left_out.b
    assert censored.error.size == left_out.error.size == 9
    log_sd = censored.model.log_sd
    assert censored.q_delta == pytest.approx(log_sd * math.sqrt(9 / 8), rel=1e-12)
    assert "survivors-censored" in {d.code for d in censored.doubts}
    assert {d.code for d in as_failed.doubts} == {"survivors-as-failed"}
    assert {d.code for d in left_out.doubts} == {"survivors-left-out", "few-tests"}


def test_censored_without_survivors_is_the_plain_evaluation():
    assert annex_d8(example(), COVS, survivors="censored").r_d == annex_d8(example(), COVS).r_d


# Subsets.

GROUPS = np.array(["short", "long"] * 6, dtype=object)


def test_each_subset_alone_is_an_evaluation_of_its_own():
    tests = example(subgroup=GROUPS)
    found = annex_d8_subsets(tests, COVS, scatter="own")
    assert list(found.subsets) == ["short", "long"]
    for label, part in found.subsets.items():
        alone = annex_d8(tests.taken(tests.in_subgroup(label)), COVS)
        assert (part.b, part.v_delta, part.r_d) == (alone.b, alone.v_delta, alone.r_d)
    assert found.together.r_d == annex_d8(tests, COVS).r_d


def test_pooled_scatter_by_hand():
    tests = example(subgroup=GROUPS)
    found = annex_d8_subsets(tests, COVS)
    squares = 0.0
    for label in ("short", "long"):
        chosen = label == GROUPS
        re, rt = EXPERIMENTAL[chosen], PREDICTED[chosen]
        b = np.sum(re * rt) / np.sum(rt * rt)
        squares += np.sum((np.log(re / rt) - np.log(re / rt).mean()) ** 2)
        part = found.subsets[label]
        assert part.b == pytest.approx(b, rel=1e-13)
        assert part.factors.k_d_n == pytest.approx(
            -stats.t.ppf(DESIGN_TAIL, 10) * math.sqrt(1 + 1 / 6), rel=1e-9
        )
    assert found.freedom == 10
    assert found.pooled_v_delta == pytest.approx(math.sqrt(math.expm1(squares / 10)), rel=1e-12)
    assert found.subsets["long"].v_delta == found.subsets["short"].v_delta == found.pooled_v_delta
    assert np.isnan(found.subsets["long"].factors.printed_k_n)
    # Alternate tests of the example lie on different levels: their own b leaves less scatter.
    assert found.pooled_v_delta < 0.6 * found.together.v_delta


def test_factors_of_the_whole_series():
    found = annex_d8_subsets(example(subgroup=GROUPS), COVS, scatter="series")
    assert found.subsets["long"].factors.k_n == found.together.factors.k_n
    assert found.subsets["long"].v_delta == found.subsets["long"].model.cov
    assert [d.code for d in found.doubts] == ["factors-of-series"]


def test_pooled_scatter_serves_a_subset_of_one_test():
    groups = np.array(["long"] * 11 + ["short"], dtype=object)
    found = annex_d8_subsets(example(subgroup=groups), COVS)
    assert found.subsets["short"].b == EXPERIMENTAL[-1] / PREDICTED[-1]
    assert found.subsets["short"].factors.k_n == pytest.approx(
        stats.t.ppf(0.95, 10) * math.sqrt(2.0), rel=1e-9
    )
    assert found.subsets["short"].doubts[0].where == "resistance.short"
    with pytest.raises(InputError, match="'short' has 1 test; its own scatter needs at least 4"):
        annex_d8_subsets(example(subgroup=groups), COVS, scatter="own")


def test_pooled_prediction_keeps_its_promise_in_small_subsets():
    # Three subsets of 4, 4 and 5 tests with levels of their own and one scatter.
    groups = np.repeat(np.array(["a", "b", "c"], dtype=object), [4, 4, 5])
    level = np.repeat([0.9, 1.0, 1.2], [4, 4, 5])
    q = 0.08
    below = []
    for i in range(500):
        x = level * np.exp(stream(30, "subsets", i).normal(0.0, q, 13))
        found = annex_d8_subsets(ComponentTests(x, np.ones(13), subgroup=groups), {})
        below.append(
            [
                special.ndtr(math.log(found.subsets[g].r_k / m) / q)
                for g, m in zip("abc", (0.9, 1.0, 1.2), strict=True)
            ]
        )
    mean = np.mean(below, axis=1)
    assert np.mean(mean) == pytest.approx(0.05, abs=4 * np.std(mean) / math.sqrt(500))


def test_unequal_scatter_is_doubted_when_pooled():
    rng = stream(4, "unequal")
    x = np.exp(np.r_[rng.normal(0, 0.02, 12), rng.normal(0, 0.2, 12)])
    groups = np.repeat(np.array(["neat", "wild"], dtype=object), 12)
    tests = ComponentTests(x, np.ones(24), subgroup=groups)
    found = annex_d8_subsets(tests, COVS)
    assert found.equal_scatter_p == pytest.approx(
        stats.bartlett(np.log(x[:12]), np.log(x[12:])).pvalue, rel=1e-9
    )
    assert [d.code for d in found.doubts] == ["unequal-scatter"]
    assert "'wild'" in found.doubts[0].message
    assert annex_d8_subsets(tests, COVS, scatter="own").doubts == ()


def test_clusters_are_doubted():
    found = annex_d8(example(cluster=["north"] * 6 + ["south"] * 6), COVS)
    assert [d.code for d in found.doubts] == ["clusters-ignored"]
    assert annex_d8(example(cluster=list(range(12))), COVS).doubts == ()


# The lower tail.


def test_the_tail_of_a_straight_sample_is_that_sample():
    # Errors that lie on a line of the paper: every share finds that line.
    u = special.ndtri((np.arange(1, 41) - 0.375) / 40.25)
    tests = ComponentTests(np.exp(0.07 + 0.1 * u), np.ones(40))
    for share in (0.1, 0.35, 1.0):
        found = annex_d8_tail(tests, COVS, share)
        assert found.count == round(40 * share)
        assert found.log_sd == pytest.approx(0.1, rel=1e-10)
        assert found.tail.b == pytest.approx(math.exp(0.07 + 0.005), rel=1e-10)
        assert found.tail.q_delta == pytest.approx(0.1, rel=1e-10)


def test_the_tail_finds_the_weaker_population():
    # A third of the specimens is weaker and scatters little; a lognormal of all has a far too wide lower tail.
    rng = stream(5, "mixture")
    weak, strong = rng.normal(0.0, 0.05, 30), rng.normal(0.5, 0.05, 60)
    tests = ComponentTests(np.exp(np.r_[weak, strong]), np.ones(90))
    found = annex_d8_tail(tests, {"material": 0.02}, 1 / 3)
    assert found.count == 30
    assert found.tail.v_delta < 0.5 * found.whole.v_delta
    assert found.tail.r_d > found.whole.r_d
    assert "errors-not-lognormal" in {d.code for d in found.whole.doubts}
    assert "tail-only" in {d.code for d in found.tail.doubts}


def test_the_line_of_half_a_normal_sample_has_hardly_any_bias():
    found = [
        annex_d8_tail(
            ComponentTests(np.exp(0.1 * stream(6, "line", i).standard_normal(30)), np.ones(30)), COVS
        )
        for i in range(400)
    ]
    sds = np.array([f.log_sd for f in found])
    assert sds.mean() == pytest.approx(0.1, abs=4 * sds.std() / 20 + 0.001)


def test_few_tests_in_the_tail_are_doubted_and_fewer_refused():
    found = annex_d8_tail(example(), COVS, 0.5)
    assert {d.code for d in found.tail.doubts} == {"tail-only", "few-in-tail"}
    with pytest.raises(InputError, match=r"0\.2 of 12 tests holds 3; .* The least share is 0\.333"):
        annex_d8_tail(example(), COVS, 0.2)


# Refusals.


def two_groups():
    return example(subgroup=GROUPS)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: annex_d8(example(), {"a": -0.1}), r"variation of 'a' is -0\.1"),
        (lambda: annex_d8(example(), COVS, gradient={"a": math.nan}), "gradient by 'a' is nan"),
        (lambda: annex_d8(example(), COVS, propagation="gradient"), "needs the gradient"),
        (lambda: annex_d8(example(), {}, gradient={"a": 0.1}, propagation="sum"), "needs the coefficients"),
        (lambda: annex_d8(example(), COVS, propagation="sums"), "Did you mean 'sum'"),
        (lambda: annex_d8(example(), COVS, nominal=[0.9, 0.0]), "nominal to mean resistance is 0"),
        (lambda: annex_d8(example(), COVS, known_v_delta=0.0), "known V_delta is 0"),
        (lambda: annex_d8(example(), COVS, survivors="censor"), "Did you mean 'censored'"),
        (lambda: annex_d8(ComponentTests(PREDICTED, PREDICTED), COVS), "no scatter"),
        (lambda: Fractiles(target_beta=-1.0), "target reliability index is -1"),
        (lambda: Fractiles(alpha_r=1.2), r"alpha_R is 1\.2"),
        (lambda: Fractiles(fractile=0.95), r"is 0\.95; it must lie between 0 and 0\.5"),
        (lambda: Fractiles(source="formulae"), "Did you mean 'formula'"),
        (lambda: Fractiles(source="table", target_beta=4.2), r"asked are 5 % and 3\.36"),
        (lambda: Fractiles(k_infinity=0.0), "k_inf is 0"),
        (lambda: fractile_factors(Fractiles(source="table"), 3), "no factors for 3 tests"),
        (lambda: fractile_factors(Fractiles(source="table"), 6, freedom=10), "pooled with that of others"),
        (lambda: annex_d8_subsets(example(), COVS), "no column of subgroups"),
        (lambda: annex_d8_subsets(two_groups(), COVS, scatter="pool"), "Did you mean 'pooled'"),
        (lambda: annex_d8_subsets(two_groups(), COVS, survivors="censored"), "cannot be taken as 'censored'"),
        (lambda: annex_d8_tail(example(), COVS, 0.0), "must be above 0 and at most 1"),
    ],
)
def test_refusals(call, message):
    with pytest.raises(InputError, match=message):
        call()
