"""The likelihoods by family; a new one is one class and one line here."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.fitting.model import Model
from calibrate.fitting.models.bounded import BetaModel, TruncatedNormalModel, UniformModel
from calibrate.fitting.models.extremes import FrechetModel, GumbelMinModel, GumbelModel, WeibullModel
from calibrate.fitting.models.gamma import ExponentialModel, GammaModel
from calibrate.fitting.models.gev import GevModel
from calibrate.fitting.models.normal import LognormalModel, NormalModel
from calibrate.fitting.models.student_t import StudentTModel
from calibrate.fitting.models.threshold import Lognormal3Model, Weibull3Model
from calibrate.registry import registered

MODELS: Mapping[str, Model] = registered(
    (
        NormalModel(),
        LognormalModel(),
        GumbelModel(),
        GumbelMinModel(),
        WeibullModel(),
        FrechetModel(),
        GammaModel(),
        UniformModel(),
        ExponentialModel(),
        Weibull3Model(),
        Lognormal3Model(),
        GevModel(),
        BetaModel(),
        StudentTModel(),
        TruncatedNormalModel(),
    ),
    by="family",
)

FITTABLE: tuple[str, ...] = tuple(MODELS)
"""Names of the families that can be fitted."""


def model_of(name: str) -> Model:
    """Return the likelihood of a family.

    Raises
    ------
    InputError
        The family is unknown or cannot be fitted.
    """
    if name in MODELS:
        return MODELS[name]
    if name == "constant":
        message = "The family 'constant' has no scatter and cannot be fitted to records."
        raise InputError(Problem(message, suggestion="Give it as a quantity, or name another family."))
    if name == "log_student_t":
        message = "The family 'log_student_t' is what a lognormal fit predicts; it is not fitted itself."
        raise InputError(Problem(message, suggestion="Fit 'lognormal'."))
    known = "" if did_you_mean(name, MODELS).startswith("Known") else f" Known: {', '.join(MODELS)}."
    message = f"There is no family '{name}'."
    raise InputError(Problem(message, suggestion=did_you_mean(name, MODELS) + known))


def default_candidates(fixed: Iterable[str], estimate: Iterable[str]) -> tuple[str, ...]:
    """Return the families that compete when none is named.

    All that can be fitted, but: `uniform` never (its likelihood at the extreme
    values of the sample is not comparable, and it denies what lies beyond
    them); those with a threshold only if it is fixed or to be estimated; those
    between bounds only if a bound is fixed.
    """
    settled = {*fixed, *estimate}
    chosen = []
    for name, model in MODELS.items():
        if not model.regular:
            continue
        if model.asked and not settled.issuperset(model.asked):
            continue
        if model.closed and not settled.intersection(model.closed):
            continue
        chosen.append(name)
    return tuple(chosen)
