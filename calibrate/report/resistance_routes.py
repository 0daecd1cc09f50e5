"""Factors from component tests: the North American sheet, closed forms beside FORM, all routes, the ledger."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from calibrate.report import numbers, symbols
from calibrate.report.table import Column, Table, as_given, each

if TYPE_CHECKING:
    from calibrate.resistance import Ledger, NorthAmericanFactor
    from calibrate.study.component_tests import ResistanceResult

_MECHANISMS = ("k_n", "predictive variable", "C_P", "floor on V", "none")


def american_table(found: NorthAmericanFactor) -> Table:
    """Return the calculation sheet of the resistance factor in the North American form."""
    other = "derived" if found.coefficients == "printed" else "printed"
    tests = numbers.count(found.n, "test")
    limit = "lower limit governs" if found.floor_governs else "as tested"
    rows = [
        ("M_m", found.material.mean, "material, mean over nominal"),
        ("V_M", found.material.cov, "its coefficient of variation"),
        ("F_m", found.fabrication.mean, "fabrication, mean over nominal"),
        ("V_F", found.fabrication.cov, "its coefficient of variation"),
        ("P_m", found.professional.mean, f"tested over predicted, mean of {tests}"),
        ("V_P", found.professional.cov, "coefficient of variation of the tests"),
        ("V_P", found.v_p, f"in use: {limit}"),
        ("C_P", found.c_p, "(1 + 1/n)(n − 1)/(n − 3)" if found.n > 3 else "for three tests"),
        ("C_phi", found.c_phi, f"factored over mean load, {found.coefficients}"),
        ("V_Q", found.v_q, f"scatter of the loads, {found.coefficients}"),
        ("beta_0", found.format.target, f"target of {found.format.name}"),
        ("V", found.v_total, "√(V_M² + V_F² + C_P V_P² + V_Q²)"),
        ("phi", found.phi, "C_φ M_m F_m P_m exp(−β_0 V)"),
        ("phi", found.phi_other, f"the same with {other} C_φ and V_Q"),
    ]
    names, values, how = zip(*rows, strict=True)
    return Table(
        (
            Column("", list(names), kind="name"),
            Column("value", list(values), each(numbers.fixed, 3), "number"),
            Column("how", [symbols.running(text) for text in how]),
        ),
        frozenset({len(rows) - 2}),
    )


def american_sentence(found: NorthAmericanFactor) -> str:
    """Return the loads from which the coefficients are derived."""
    loads = found.format.loads
    c_phi, v_q = found.format.coefficients("derived")
    fixed = numbers.fixed
    return (
        f"The loads of {found.format.name}: load factors {fixed(float(loads.dead_factor), 2)} and "
        f"{fixed(float(loads.live_factor), 2)}, dead over live load {fixed(float(loads.dead_to_live), 3)}, mean over "
        f"nominal {fixed(float(loads.dead_bias), 2)} and {fixed(float(loads.live_bias), 2)}, coefficients of variation "
        f"{fixed(float(loads.dead_cov), 2)} and {fixed(float(loads.live_cov), 2)}. From them follow "
        f"C_φ = {fixed(c_phi, 3)} and V_Q = {fixed(v_q, 3)}; printed are {fixed(found.format.printed_c_phi, 2)} and "
        f"{fixed(found.format.printed_v_q, 2)}."
    )


def mean_value_table(found: ResistanceResult) -> Table | None:
    """Return the closed forms from bias statistics beside FORM, by the ratio of the loads; None where not asked."""
    factors, asked = found.mean_value, found.records.mean_value
    if factors is None or asked is None:
        return None
    shape = np.shape(factors.lognormal)

    def flat(values: object) -> list[float]:
        return np.ravel(np.broadcast_to(np.asarray(values, dtype=np.float64), shape)).tolist()

    show = each(numbers.fixed, 3)
    columns = [
        Column("dead over live", flat(asked.loads.dead_to_live), each(numbers.significant, 3), "number"),
        Column("C_phi", flat(asked.loads.calibration_coefficient), show, "number", symbol=True),
        Column("V_Q", flat(factors.load_cov), show, "number", symbol=True),
        Column("lognormal", flat(factors.lognormal), show, "number", group="φ by closed form"),
        Column("linearised", flat(factors.linearised), show, "number", group="φ by closed form"),
        Column("φ by FORM", flat(factors.form.phi), show, "number"),
        Column("α of resistance", flat(factors.form.alpha_resistance), each(numbers.fixed, 2), "number"),
        Column("β at lognormal φ", flat(factors.beta), each(numbers.beta), "number"),
    ]
    return Table(tuple(columns))


def mean_value_sentence(found: ResistanceResult) -> str:
    """Return the inputs of the factors from bias statistics."""
    asked, factors = found.records.mean_value, found.mean_value
    assert asked is not None
    assert factors is not None
    loads = asked.loads

    def of(values: object) -> str:
        return numbers.span(np.ravel(np.asarray(values, dtype=np.float64)))

    return (
        f"Target β = {numbers.significant(asked.target)}; load factors {of(loads.dead_factor)} (dead) and "
        f"{of(loads.live_factor)} (live), mean over nominal {of(loads.dead_bias)} and {of(loads.live_bias)}, "
        f"coefficients of variation {of(loads.dead_cov)} and {of(loads.live_cov)}. The closed form takes V_Q without "
        "weights, √(V_D² + V_L²); FORM has the two loads as separate lognormal variables. Bias and scatter of "
        "the resistance are plain estimates from the tests."
    )


def routes_table(found: ResistanceResult) -> Table:
    """Return all routes from the same tests side by side."""
    routes = found.routes

    def of(kind: str) -> list[float | None]:
        return [r.factor if r.kind == kind else None for r in routes]

    show = each(numbers.fixed, 3)
    columns = [
        Column("route", [r.name for r in routes]),
        Column("r_k", [r.r_k for r in routes], show, "number", symbol=True),
        Column("r_d", [r.r_d for r in routes], show, "number", symbol=True),
        Column("gamma_M", of("gamma_M"), show, "number", symbol=True),
    ]
    if any(r.kind == "phi" for r in routes):
        columns.append(Column("phi", of("phi"), show, "number", symbol=True))
    return Table((*columns, Column("what it allows for", [symbols.running(r.statement) for r in routes])))


def why_routes_differ(found: ResistanceResult) -> str:
    """Return one paragraph on why the routes differ, of those that are there."""
    annex = found.annex
    counted = numbers.count(annex.error.size, "test")
    texts = [
        "The routes start from the same tests and count different things. D.8 takes the scatter of the basic variables "
        f"(V_rt = {numbers.significant(annex.v_rt, 3)}) as known, with k_∞, and that of the errors as estimated"
        + (
            ", but so many tests that it is taken as known, too."
            if annex.many
            else f" from {counted}, with k_n."
        ),
        "The sample of ratios has no scatter of the basic variables and weighs every test the same, where the slope b "
        "weighs large specimens more"
        + (
            ", and it leaves out the tests that were stopped."
            if found.direct.n < found.records.tests.n
            else "."
        ),
    ]
    if found.clusters is not None and math.isfinite(found.clusters.effective_n):
        texts.append(
            f"Tests of one cluster resemble each other, so that {numbers.count(found.direct.n, 'test')} tell as much "
            f"as {numbers.significant(found.clusters.effective_n, 3)} independent ones; k_n follows that number and a "
            "new cluster has a mean of its own."
        )
    if (american := found.north_american) is not None:
        floor = (
            " and the lower limit on V_P, which governs here"
            if american.floor_governs
            else " and a lower limit on V_P, which does not govern here"
        )
        texts.append(f"The North American form allows for few tests by C_P{floor}; it is of first order.")
    if found.mean_value is not None:
        texts.append(
            "The closed form from bias statistics takes its estimates as known; FORM solves the same problem without "
            "its simplifications of the loads."
        )
    if any(r.kind == "phi" for r in found.routes):
        texts.append(
            "A resistance factor φ multiplies the nominal resistance and holds for its own load factors, loads and "
            "target; a partial factor γ_M divides a characteristic value. φ and γ_M mean different things and are not "
            "to be compared as numbers."
        )
    return " ".join(texts)


def ledger_table(ledger: Ledger) -> Table:
    """Return where the number of tests enters, one line for each path."""
    lines = [(path, ledger.on(path)) for path in ledger.paths]
    columns = [
        Column("from the tests to", [symbols.running(path.split(" to ", 1)[-1]) for path, _ in lines]),
        Column("n", [min(e.n for e in on) for _, on in lines], kind="number"),
        *(
            Column(
                mechanism,
                ["✓" if mechanism in {e.mechanism for e in on} else "" for _, on in lines],
                as_given,
                symbol=mechanism in ("k_n", "C_P"),
            )
            for mechanism in _MECHANISMS
        ),
        Column("procedure", [on[0].procedure for _, on in lines]),
    ]
    return Table(tuple(columns))
