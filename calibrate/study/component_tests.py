"""What component tests against prediction say: model factor, characteristic and design resistance by every route."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from calibrate.distributions import Distribution, distribution
from calibrate.engine import stream
from calibrate.errors import Doubt, InputError
from calibrate.resistance import (
    AnnexD8,
    ClusterEffects,
    DirectDesignValue,
    FractileFactor,
    Fractiles,
    MeanValueFactors,
    NorthAmericanFactor,
    ScatterSeparation,
    SubsetsD8,
    TailD8,
    TrendOptions,
    Trends,
    TwoLayers,
    annex_d8,
    annex_d8_subsets,
    annex_d8_tail,
    cluster_effects,
    layer,
    mean_value_factors,
    north_american_factor,
    plain_design_value,
    predictive_design_value,
    professional_part,
    separate_scatter,
    trend_options,
    trends,
    two_layers,
)
from calibrate.study.model import ComponentRecords, Study

FRACTILE = 0.05
ALPHA_R = 0.8


@dataclass(frozen=True, slots=True)
class Route:
    """One way from the same tests to a factor.

    ``r_k`` and ``r_d`` are over the prediction from mean properties, NaN where the route has none; ``factor`` is
    gamma_M (r_k over r_d) of European routes and phi of North American ones, told apart by ``kind``.
    """

    name: str
    kind: str
    r_k: float
    r_d: float
    factor: float
    statement: str


@dataclass(frozen=True, slots=True, eq=False)
class ResistanceResult:
    """The evaluation of one table of component tests.

    Attributes
    ----------
    records : ComponentRecords
    annex : AnnexD8
        All tests together.
    subsets : SubsetsD8 or None
        Where the tests name subgroups.
    trends : Trends
    options : tuple of TrendOptions
        One for each covariate with a trend.
    clusters : ClusterEffects or None
    direct : DirectDesignValue
        Of measured over predicted, as a sample (D.7).
    north_american : NorthAmericanFactor or None
    mean_value : MeanValueFactors or None
    separation : ScatterSeparation or None
        Of the model's own scatter from what is known to be in the tests.
    tail : TailD8 or None
        Of the lower tail alone, where the study asks for it.
    layers : TwoLayers or None
        The product with the model factor of the numerical results, where these are numerical.
    routes : tuple of Route
    doubts : tuple of Doubt
    """

    records: ComponentRecords
    annex: AnnexD8
    subsets: SubsetsD8 | None
    trends: Trends
    options: tuple[TrendOptions, ...]
    clusters: ClusterEffects | None
    direct: DirectDesignValue
    north_american: NorthAmericanFactor | None
    mean_value: MeanValueFactors | None
    separation: ScatterSeparation | None
    routes: tuple[Route, ...]
    doubts: tuple[Doubt, ...]
    tail: TailD8 | None = None
    layers: TwoLayers | None = None


def evaluate_resistances(study: Study) -> dict[str, ResistanceResult]:
    """Evaluate every table of component tests.

    Raises
    ------
    InputError
        The tests cannot be evaluated as the study asks, with the line of their section.
    """
    found = {}
    for name, records in study.resistances.items():
        try:
            found[name] = evaluate(
                records,
                study.target_beta,
                study.seed,
                None if records.second_layer is None else study.resistances[records.second_layer],
            )
        except InputError as error:
            raise InputError(
                [
                    type(p)(f"[resistance.{name}] {p.message}", study.shown, records.line, p.suggestion)
                    for p in error.problems
                ]
            ) from error
    return found


def evaluate(
    records: ComponentRecords, target_beta: float, seed: int, second: ComponentRecords | None = None
) -> ResistanceResult:
    """Evaluate one table of component tests for a target of the same period as the study's.

    ``second`` are the tests of physical over numerical results, where the tests themselves are numerical.
    """
    where = f"resistance.{records.name}"
    tests, failed = records.tests, ~records.tests.survived
    survivors = records.survivors if tests.survived.any() else "refuse"
    source = "table" if records.table_factors else "formula"
    fractiles = Fractiles(target_beta=target_beta, alpha_r=ALPHA_R, fractile=FRACTILE, source=source)
    gradient = dict(records.gradient) or None
    # A plain product is what D.8 has formulas for; its gradient is shown beside them.
    product = gradient is None or all(math.isclose(gradient[n], cov) for n, cov in records.covs.items())
    question: dict[str, Any] = {
        "gradient": gradient,
        "propagation": "sum" if product else "gradient",
        "nominal": records.nominal_ratio,
        "fractiles": fractiles,
        "where": where,
    }
    annex = annex_d8(tests, records.covs, survivors=survivors, **question)
    others = "leave_out" if survivors == "censored" else survivors
    subsets = None
    if len(tests.subgroups) > 1:
        subsets = annex_d8_subsets(tests, records.covs, scatter=records.subsets, survivors=others, **question)
    tendency = trends(
        tests.ratio,
        tests.predicted,
        {k: v for k, v in tests.inputs.items() if np.ptp(v) > 0.0},
        stopped=tests.survived if tests.survived.any() else None,
        stopped_are="regression" if survivors == "censored" else "left out",
        level=records.trend_level,
        where=where,
    )
    asked_of: dict[str, Any] = {
        "characteristic": FractileFactor.predictive(FRACTILE),
        "design": FractileFactor.predictive(_tail(ALPHA_R * target_beta)),
        "other_log_sd": annex.q_rt,
        "where": where,
    }
    delta = tests.ratio[failed]
    options = tuple(
        trend_options(
            delta,
            tests.inputs.get(covariate, tests.predicted)[failed],
            covariate,
            split_at=records.split_at.get(covariate),
            alpha_r=ALPHA_R,
            target=target_beta,
            **asked_of,
        )
        for covariate in tendency.with_trend
        # The options correct by a power of the covariate; one that is not positive has none.
        if (tests.inputs.get(covariate, tests.predicted)[failed] > 0.0).all()
    )
    clusters = None
    if tests.cluster is not None and len(set(tests.cluster[failed].tolist())) > 1:
        clusters = cluster_effects(delta, tests.cluster[failed], **asked_of)
    tail = None
    if records.tail_share is not None:
        tail = annex_d8_tail(tests, records.covs, records.tail_share, survivors=others, **question)
    layers = None
    if second is not None:
        layers = two_layers(
            layer(delta, f"resistance.{records.name}"),
            layer(second.tests.ratio[~second.tests.survived], f"resistance.{second.name}"),
            **asked_of,
        )
    direct = predictive_design_value(delta, fractiles=fractiles, where=where)
    plain = plain_design_value(delta, fractiles=fractiles, where=where)
    american = bias = None
    if (asked := records.north_american) is not None:
        american = north_american_factor(
            professional_part(delta),
            int(delta.size),
            material=asked.material,
            fabrication=asked.fabrication,
            design_format=asked.format,
            coefficients=asked.coefficients,  # type: ignore[arg-type]
            where=where,
        )
    if records.mean_value is not None:
        bias = mean_value_factors(
            annex.model.b if survivors == "censored" else float(np.mean(delta)),
            annex.v_r,
            records.mean_value.target,
            records.mean_value.loads,
            where=where,
        )
    separation = None
    if records.known_scatter:
        separation = separate_scatter(
            annex.v_delta,
            max(int(failed.sum()) - 1, 1),
            records.known_scatter,
            stream(seed, "resistance", records.name),
            where=where,
        )
    parts = (annex, subsets, tendency, *options, clusters, direct, american, bias, separation, layers)
    doubts = dict.fromkeys(d for part in parts if part is not None for d in part.doubts)
    if tail is not None:
        doubts |= dict.fromkeys(tail.tail.doubts)
    return ResistanceResult(
        records,
        annex,
        subsets,
        tendency,
        options,
        clusters,
        direct,
        american,
        bias,
        separation,
        (*_routes(annex, clusters, (plain, direct), american, bias), *_further(tail, layers)),
        tuple(doubts),
        tail,
        layers,
    )


def _further(tail: TailD8 | None, layers: TwoLayers | None) -> list[Route]:
    found = []
    if tail is not None:
        used = tail.tail.small
        text = f"The lowest {100.0 * tail.share:.3g} % of the tests on lognormal paper, k_n of all of them."
        found.append(Route("lower tail alone", "gamma_M", used.r_k, used.r_d, used.gamma_m, text))
    if layers is not None:
        form = layers.closed_form
        text = "Numerical results with the model factor of physical tests against them; k_n of the effective number."
        found.append(
            Route(
                "two layers",
                "gamma_M",
                float(np.min(form.characteristic)),
                float(np.min(form.design)),
                form.partial_factor,
                text,
            )
        )
    return found


def own_scatter(used: Distribution, separation: ScatterSeparation, name: str) -> Distribution:
    """Return a model factor with its own scatter only; as it was where that would be none.

    Raises
    ------
    InputError
        The family is not lognormal.
    """
    if used.family.name != "lognormal":
        raise InputError(
            f"resistance.{name} states known_scatter, which can be taken out of a lognormal model factor only; the "
            f"variable is {used.family.name}."
        )
    if not separation.log_variance > 0.0:
        return used
    median = float(used.parameters["median"])
    return distribution("lognormal", median=median, log_sd=math.sqrt(separation.log_variance))


def _tail(index: float) -> float:
    from scipy.special import ndtr

    return float(ndtr(-index))


def _routes(
    annex: AnnexD8,
    clusters: ClusterEffects | None,
    direct: tuple[DirectDesignValue, DirectDesignValue],
    american: NorthAmericanFactor | None,
    bias: MeanValueFactors | None,
) -> tuple[Route, ...]:
    """Return all routes side by side, each with what it takes into account."""
    used = annex.large if annex.many else annex.small
    found = [
        Route(
            "EN 1990 D.8",
            "gamma_M",
            used.r_k,
            used.r_d,
            used.gamma_m,
            "Slope b, scatter of the errors with k_n and k_d,n, scatter of the basic variables as known.",
        ),
        *(
            Route(
                f"sample of ratios, D.7 {name}",
                "gamma_M",
                found.x_k,
                found.x_d,
                found.gamma_m,
                f"Measured over predicted as a sample of its own, without scatter of the basic variables; {how}.",
            )
            for name, found, how in zip(
                ("plain", "predictive"),
                direct,
                ("k_n and k_d,n by formula or table", "Student's t, the same by formula"),
                strict=True,
            )
        ),
    ]
    if clusters is not None:
        found.append(
            Route(
                "with scatter between clusters",
                "gamma_M",
                clusters.characteristic,
                clusters.design,
                clusters.partial_factor,
                "A new cluster each time; k_n of the effective number of tests.",
            )
        )
    if american is not None:
        found.append(
            Route(
                f"North American form, {american.format.name}",
                "phi",
                math.nan,
                math.nan,
                american.phi,
                "First-order, with C_P for the number of tests and a lower limit on V_P.",
            )
        )
    if bias is not None:
        for name, value in (
            ("lognormal closed form from bias statistics", bias.lognormal),
            ("FORM with the same statistics", bias.form.phi),
        ):
            low = float(np.min(value))
            found.append(
                Route(
                    name,
                    "phi",
                    math.nan,
                    math.nan,
                    low,
                    "Smallest over the dead-to-live ratios; plain estimates.",
                )
            )
    return tuple(found)
