"""Small calibrations for the tests of this folder."""

import numpy as np
import pytest

from calibrate.expressions import parse, parse_comparison
from calibrate.factors import Factor, Response, RuleModel
from calibrate.situations import BasicVariable


def variable(name, family, **texts):
    return BasicVariable(name, family, {k: parse(v) for k, v in texts.items()})


VARIABLES = (
    variable("R", "lognormal", mean="1.15", cov="0.12"),
    variable("G", "normal", mean="1 - chi", cov="0.10"),
    variable("Q", "gumbel", mean="0.7 * chi", cov="0.30"),
)


def rule(chi, *, name="member", check=None, limit_state=None, share=1.0, weight=None, more=()):
    """Return a rule over load ratios; R, G and Q are its basic variables unless more are given."""
    chi = np.asarray(chi, dtype=float)
    check = check or "z / gamma_M >= gamma_G * (1 - chi) + gamma_Q * chi"
    limit_state = limit_state or "z * R >= G + Q"
    weight = np.full(chi.size, 1.0) if weight is None else np.asarray(weight, dtype=float)
    return RuleModel(
        name,
        parse_comparison(check).margin,
        "z",
        parse_comparison(limit_state).margin,
        (*VARIABLES, *more),
        {"chi": chi},
        weight / weight.sum(),
        share,
    )


def free(name, present, lower, upper, step=None):
    return Factor(name, present, lower, upper, step, held=False)


def held(name, value):
    return Factor(name, value, value, value, None, held=True)


FACTORS = (free("gamma_M", 1.1, 0.8, 2.0, 0.05), held("gamma_G", 1.2), free("gamma_Q", 1.5, 1.0, 2.5, 0.05))


class Kit:
    """What tests build from."""

    rule = staticmethod(rule)
    variable = staticmethod(variable)
    free = staticmethod(free)
    held = staticmethod(held)
    factors = FACTORS

    @staticmethod
    def response(rules=None, factors=FACTORS, workers=1):
        chi = np.linspace(0.1, 0.9, 9)
        return Response(rules or [rule(chi)], factors, workers)


@pytest.fixture
def kit():
    return Kit
