"""An action over classes of sites: its mixture for the calibration, then beta by class, on average, and of the worst.

Factors are calibrated with the action at a site drawn at random. What that hides, a class in which every structure is
less safe than the average, is computed afterwards with the sizes of the proposed factors.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibrate.actions.territories import SiteReliability, Territory, reliability_over_sites, territory
from calibrate.distributions import distribution
from calibrate.errors import Doubt, InputError, Problem
from calibrate.factors import Calibration, Response, RuleModel
from calibrate.situations import BasicVariable
from calibrate.study.model import SiteTable, Study, Variable

if TYPE_CHECKING:
    import pandas as pd

Array = NDArray[np.float64]

FAR_FROM_AVERAGE = 0.05
"""Difference between beta of the mixture by FORM and beta on average from which FORM on the mixture is doubted."""

FAR_BELOW_TARGET = 0.5
"""Distance of a class below the target from which it is named."""


@dataclass(frozen=True, slots=True, eq=False)
class SiteBeta:
    """Beta over the classes of sites with the proposed factors, N rows as in the table of situations.

    Attributes
    ----------
    variable : str
        The action over sites.
    table : SiteTable
    reliability : SiteReliability
        Arrays of shape (K, N) and (N,).
    mixture : array (N,)
        Beta of the calibration: FORM with the mixture.
    uses : bool array (N,)
        Whether the rule of the row uses the action; where not, all classes have the same beta.
    """

    variable: str
    table: SiteTable
    reliability: SiteReliability
    mixture: Array
    uses: NDArray[np.bool_]


def variable_over_sites(study: Study) -> Variable | None:
    """Return the variable whose model differs by class of site, if there is one."""
    return next((v for v in study.variables.values() if v.sites is not None), None)


def site_model(study: Study, variable: Variable, years: float) -> Territory:
    """Return an action by class of site for a period, in SI units.

    Raises
    ------
    InputError
        The arguments of some class make no distribution of the family.
    """
    assert variable.sites is not None
    table = study.sites[variable.sites]
    known = {**{q.name: q.value for q in study.quantities.values()}, **table.columns}
    count = len(table.labels)
    arguments = {
        key: np.broadcast_to(expression.value(known), (count,))
        for key, expression in variable.arguments.items()
    }
    try:
        components = distribution(variable.families[0], **arguments)
    except InputError as error:
        raise InputError(
            [
                Problem(f"Variable '{variable.name}': {p.message}", study.shown, variable.line)
                for p in error.problems
            ]
        ) from error
    ratio = years / variable.period if variable.period is not None and variable.converted else 1.0
    return territory(components, table.weights, ratio)


def site_beta(
    study: Study,
    variables: Mapping[str, BasicVariable],
    models: list[RuleModel],
    calibration: Calibration,
    workers: int = 1,
) -> SiteBeta | None:
    """Return beta by class of site with the proposed factors; None for a study without such an action.

    One call of FORM for each class and rule, over all of its situations.

    Parameters
    ----------
    variables : mapping
        As calibrated.
    models : list of RuleModel
        The rules with these variables.
    workers : int
        Threads of FORM.
    """
    over = variable_over_sites(study)
    if over is None or not any(over.name in rule.variables for rule in study.rules.values()):
        return None
    assert over.sites is not None
    evaluation = calibration.proposed.evaluation
    area = site_model(study, over, study.reference_period)
    own = [k for k, rule in enumerate(study.rules.values()) if over.name in rule.variables]
    gamma = evaluation.gamma
    start = dataclasses.replace(evaluation, per_rule=tuple(evaluation.per_rule[k] for k in own))
    n = study.situations.n
    uses = np.repeat(np.isin(np.arange(len(models)), own), n)
    beta = np.tile(evaluation.beta, (len(area.weights), 1))
    for site in range(len(area.weights)):
        at_site = dataclasses.replace(variables[over.name], fitted=area.site(site), of_classes=False)
        response = Response([_with(models[k], at_site) for k in own], study.factors, workers)
        beta[site, uses] = response(gamma, start).beta
    found = reliability_over_sites(beta, area.weights)
    return SiteBeta(over.name, study.sites[over.sites], found, evaluation.beta, uses)


def _with(model: RuleModel, variable: BasicVariable) -> RuleModel:
    def replaced(variables: tuple[BasicVariable, ...]) -> tuple[BasicVariable, ...]:
        return tuple(variable if v.name == variable.name else v for v in variables)

    alternatives = tuple(dataclasses.replace(a, variables=replaced(a.variables)) for a in model.alternatives)
    return dataclasses.replace(model, variables=replaced(model.variables), alternatives=alternatives)


def site_table(study: Study, found: SiteBeta | None) -> pd.DataFrame | None:
    """Return the columns of sites.csv, one row per rule and situation; None without sites.

    Columns: rule, situation, ``beta_<class>`` for each class, average_beta (of the weighted mean failure probability),
    worst_beta, worst_site (empty in rules without the action), mixture_beta (of the calibration).
    """
    import pandas as pd

    if found is None:
        return None
    reliability, n = found.reliability, study.situations.n
    labels = np.array(found.table.labels, dtype=object)
    there = found.uses & np.isfinite(reliability.worst)
    return pd.DataFrame(
        {
            "rule": np.repeat(np.array(list(study.rules), dtype=object), n),
            "situation": np.tile(np.arange(1, n + 1), len(study.rules)),
            **{
                f"beta_{label}": row
                for label, row in zip(found.table.labels, reliability.by_site, strict=True)
            },
            "average_beta": reliability.average,
            "worst_beta": reliability.worst,
            "worst_site": np.where(there, labels[reliability.worst_site], ""),
            "mixture_beta": found.mixture,
        }
    )


def site_doubts(study: Study, found: SiteBeta | None, weight: Array) -> list[Doubt]:
    """Return doubts about FORM on the mixture, and about classes that the average hides.

    Parameters
    ----------
    weight : array (N,)
        Of the rows.
    """
    if found is None:
        return []
    where = f"variables.{found.variable}"
    rows = found.uses & (weight > 0.0)
    doubts = []
    apart = np.abs(found.mixture - found.reliability.average)
    apart = np.where(rows & np.isfinite(apart), apart, 0.0)
    if apart.max() > FAR_FROM_AVERAGE:
        k = int(np.argmax(apart))
        share = float(weight[apart > FAR_FROM_AVERAGE].sum() / weight[rows].sum())
        message = (
            "FORM with the mixture of all sites, for which the factors were calibrated, and the total probability "
            f"over the sites differ by up to {apart[k]:.2f} in β ({found.mixture[k]:.2f} against "
            f"{found.reliability.average[k]:.2f}), by more than {FAR_FROM_AVERAGE:g} in {100.0 * share:.0f} % of the "
            "situations by weight. FORM sees a plane at the nearest design point, while each class adds its failures: "
            "the second is the better."
        )
        doubts.append(Doubt("sites-mixed-approximately", message, where))
    for label, share, beta in zip(
        found.table.labels, found.table.weights, found.reliability.by_site, strict=True
    ):
        below = rows & np.isfinite(beta) & (beta < study.target_beta - FAR_BELOW_TARGET)
        if not (share > 0.0 and below.any()):
            continue
        part = float(weight[below].sum() / weight[rows].sum())
        message = (
            f"In class '{label}', {100.0 * share:.3g} % of the sites, β falls to {beta[below].min():.2f}, and lies "
            f"more than {FAR_BELOW_TARGET:g} below the target {study.target_beta:g} in {100.0 * part:.0f} % of the "
            "situations by weight. The average over sites does not show it; a value of the action by class would."
        )
        doubts.append(Doubt("site-below-target", message, where))
    return doubts
