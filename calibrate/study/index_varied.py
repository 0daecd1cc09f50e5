"""What of one design situation can be varied, everything else held: its value now, its unit, and what follows it."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibrate.distributions import Distribution, family
from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.expressions import Expression, constant_expression, parse
from calibrate.factors import RuleModel
from calibrate.situations import BasicVariable
from calibrate.study.index_scene import Evaluated, Scene, evaluated, index_slope
from calibrate.study.model import Quantity
from calibrate.study.tables import size_unit
from calibrate.units import ONE, Unit, split_value

Array = NDArray[np.float64]

MOMENTS = ("mean", "cov", "sd")
FACTOR, SIZE, QUANTITY, AXIS, MOMENT = "factor", "size", "quantity", "axis", "moment"


@dataclass(frozen=True, slots=True, eq=False)
class Varied:
    """Something that is varied in one design situation.

    Attributes
    ----------
    name : str
        As a user calls it: a name of the study, or VARIABLE.mean, VARIABLE.cov, VARIABLE.sd.
    kind : str
        ``factor``, ``size``, ``quantity``, ``axis`` or ``moment``.
    unit : Unit
        In which values are read and shown.
    present : float
        In SI units; NaN where there is none.
    note : str
        What happens with the rest, a sentence.
    model : RuleModel
        Of one situation; ``symbol`` is one of its values.
    symbol : str
    follows : mapping of str to Expression
        Values that are computed from it, each after those that it uses.
    """

    name: str
    kind: str
    unit: Unit
    present: float
    note: str
    model: RuleModel
    symbol: str
    follows: Mapping[str, Expression] = field(default_factory=dict)

    def models(self, values: Array) -> RuleModel:
        """Return the model over as many situations as values, in SI units, are given."""
        wide = self.model.take(np.zeros(values.size, dtype=np.intp))
        known = {**wide.values, self.symbol: np.array(values)}
        with np.errstate(all="ignore"):
            for name, expression in self.follows.items():
                known[name] = np.array(np.broadcast_to(expression.value(known), values.shape))
        return dataclasses.replace(wide, values=known)

    def evaluated(self, values: Array) -> tuple[Evaluated, Array]:
        """Return sizes and reliability for these values, in SI units, and d beta by the value.

        Raises
        ------
        InputError
            For some value a basic variable has no distribution.
        """
        answer = evaluated(self.models(values))
        return answer, index_slope(answer, self.symbol, self.follows)


def varied(scene: Scene, name: str, size: float) -> Varied:
    """Return what a name stands for.

    Parameters
    ----------
    scene : Scene
    name : str
    size : float
        The present size in SI units; NaN where there is none.

    Raises
    ------
    InputError
        The name is unknown, does not enter the rule, or cannot be varied.
    """
    model, study = scene.model, scene.study
    if name == model.size_name:
        values = {**model.values, name: np.array([size])}
        free = dataclasses.replace(model, check=None, size_name=None, values=values)
        note = "The size is given; the design check is not looked at."
        return Varied(name, SIZE, size_unit(study, scene.rule), size, note, free, name)
    variable, dot, moment = name.partition(".")
    if dot and variable in scene.rule.variables and moment in MOMENTS:
        return _moment(scene, variable, moment, size)
    if name in study.variables:
        hint = f"Write {', '.join(f'{name}.{m}' for m in MOMENTS[:-1])} or {name}.{MOMENTS[-1]}."
        raise InputError(
            Problem(f"'{name}' is a basic variable; what varies is one of its moments.", suggestion=hint)
        )
    known = dict(_values_of_study(scene))
    if name not in known:
        names = can_be_varied(scene)
        close = did_you_mean(name, names)
        listed = f"Known: {', '.join(names)}."
        hint = listed if close.startswith("Known") else f"{close} {listed}"
        raise InputError(Problem(f"'{name}' is nothing that can be varied.", suggestion=hint))
    if name not in _entering(scene):
        text = f"'{name}' does not enter rule '{scene.rule.name}', so that β does not depend on it."
        raise InputError(Problem(text, suggestion=f"What enters: {', '.join(can_be_varied(scene))}."))
    _not_frozen(scene, name)
    kind, unit = known[name]
    present = float(np.ravel(model.values[name])[0])
    return Varied(name, kind, unit, present, _note(scene, name), model, name, _follows(scene, name))


def can_be_varied(scene: Scene) -> list[str]:
    """Return every name that can be varied."""
    entering = _entering(scene)
    names = [name for name, _ in _values_of_study(scene) if name in entering]
    if scene.model.size_name is not None:
        names.insert(0, scene.model.size_name)
    for v in scene.model.variables:
        names += [f"{v.name}.{m}" for m in MOMENTS if not _hindrance(scene, v, m)]
    return names


def _values_of_study(scene: Scene) -> Iterator[tuple[str, tuple[str, Unit]]]:
    """Yield the factors, quantities and numeric axes or columns with their kinds and units."""
    study = scene.study
    for f in study.factors:
        yield f.name, (FACTOR, ONE)
    for q in study.quantities.values():
        yield q.name, (QUANTITY, q.unit)
    for name, column in study.situations.columns.items():
        if column.dtype.kind == "f":
            yield name, (AXIS, study.situations.units.get(name, ONE))


def _definitions(scene: Scene) -> dict[str, Expression]:
    """Return the quantities and derived quantities that are computed from others, each after those that it uses."""
    found = {}
    for q in scene.study.quantities.values():
        expression = _formula(q)
        if expression is not None:
            found[q.name] = expression
    return {**found, **scene.study.derived}


def _formula(quantity: Quantity) -> Expression | None:
    """Return the expression of a quantity that uses others; None for a number."""
    if quantity.characteristic is not None or split_value(quantity.text) is not None:
        return None
    expression = parse(quantity.text)
    return expression if expression.names else None


def _follows(scene: Scene, name: str) -> dict[str, Expression]:
    moving, found = {name}, {}
    for other, expression in _definitions(scene).items():
        if other != name and moving.intersection(expression.names):
            moving.add(other)
            found[other] = expression
    return found


def _entering(scene: Scene) -> set[str]:
    """Return every name that the design check, the limit state or a model of the rule uses, directly or not."""
    model = scene.model
    used = set(model.limit_state.names) | (set() if model.check is None else set(model.check.names))
    for v in model.variables:
        used |= v.argument_names()
    for name, expression in reversed(_definitions(scene).items()):
        if name in used:
            used |= set(expression.names)
    return used


def _not_frozen(scene: Scene, name: str) -> None:
    """Refuse what a model over sites was made from: it does not follow."""
    for v in scene.rule.variables:
        variable = scene.study.variables[v]
        if variable.sites is not None and any(e.depends_on(name) for e in variable.arguments.values()):
            raise InputError(
                f"'{name}' cannot be varied: the model of '{v}' over its classes of sites rests on it."
            )


def _note(scene: Scene, name: str) -> str:
    sized = scene.model.size_name
    texts = [f"The size {sized} is solved anew for each value."] if sized is not None else []
    quantity = scene.study.quantities.get(name)
    if quantity is not None and quantity.of in scene.rule.variables:
        texts.append(f"The model of {quantity.of} stays as it is.")
    return " ".join(texts)


# ------------------------------------------------------------------- moments


def _hindrance(scene: Scene, variable: BasicVariable, moment: str) -> str:
    """Return why a moment cannot be varied; empty where it can."""
    member = family(variable.family) if variable.fitted is None else variable.fitted.family
    if variable.fitted is not None and type(variable.fitted) is not Distribution:
        return "its model is no single distribution with moments of its own to vary"
    if (
        moment not in ("mean", *(MOMENTS[1:] if len(member.moment_names) == 2 else ()))
        or not member.moment_names
    ):
        return f"the family '{member.name}' is not given by it"
    names = [v.name for v in scene.model.variables]
    given = variable.arguments.get(moment)
    uses = [given] if given is not None else list(variable.arguments.values())
    parents = sorted({n for e in uses for n in e.names if n in names})
    return f"it follows from {', '.join(parents)}" if parents else ""


def _moment(scene: Scene, name: str, moment: str, size: float) -> Varied:
    index = scene.rule.variables.index(name)
    variable = scene.model.variables[index]
    shown = f"{name}.{moment}"
    if why := _hindrance(scene, variable, moment):
        raise InputError(
            Problem(
                f"'{shown}' cannot be varied: {why}.", suggestion=f"Known: {', '.join(can_be_varied(scene))}."
            )
        )
    values = dict(scene.model.values)
    if scene.model.size_name is not None:
        values[scene.model.size_name] = np.array([size if math.isfinite(size) else 1.0])
    symbol = "varied"
    while symbol in values or symbol in scene.study.variables:
        symbol += "_"
    arguments, present, held = _replaced(variable, values, moment, symbol)

    def changed(v: BasicVariable) -> BasicVariable:
        if v.name != name:
            return v
        member = v.family if v.fitted is None else v.fitted.family.name
        return dataclasses.replace(v, family=member, arguments=arguments, fitted=None)

    model = scene.model
    one = dataclasses.replace(
        model,
        variables=tuple(map(changed, model.variables)),
        alternatives=tuple(
            dataclasses.replace(a, variables=tuple(map(changed, a.variables))) for a in model.alternatives
        ),
        values={**model.values, symbol: np.array([present])},
    )
    study_variable = scene.study.variables[name]
    note = (
        f"Of the model of {name} as the study gives it; its {held} stays."
        if held
        else f"Of the model of {name}."
    )
    if variable.ratio != 1.0:
        note += " The model is converted to the reference period afterwards."
    unit = ONE if moment == "cov" else study_variable.unit
    return Varied(shown, MOMENT, unit, present, note, one, symbol)


def _replaced(
    variable: BasicVariable, values: Mapping[str, object], moment: str, symbol: str
) -> tuple[dict[str, Expression], float, str]:
    """Return the arguments with the moment replaced by a name, its present value, and which moment stays."""
    arguments = dict(variable.arguments)
    if moment in arguments:
        present = _number(arguments[moment].value(values))
    else:
        alone = dataclasses.replace(variable, ratio=1.0, presence=1.0, size_ratio=None, stress_profile=None)
        base = alone.distribution(values)
        present = _number(getattr(base, moment))
        if "mean" not in arguments:
            kept = {k: constant_expression(_number(base.parameters[k])) for k in base.family.moments_keep}
            arguments = {"mean": constant_expression(_number(base.mean)), **kept}
            if len(base.family.moment_names) == 2:
                arguments["cov"] = constant_expression(_number(base.cov))
    if moment != "mean":
        arguments = {k: e for k, e in arguments.items() if k not in ("cov", "sd")}
    arguments[moment] = parse(symbol)
    held = "mean" if moment != "mean" else next((k for k in ("cov", "sd") if k in arguments), "")
    return arguments, present, held


def _number(value: object) -> float:
    return float(np.ravel(np.asarray(value))[0])


def present_size(answer: Evaluated) -> float:
    """Return the size in SI units, NaN where there is none."""
    if answer.found.size is None:
        return math.nan
    return float(answer.found.size[0])
