"""The rules of a study: design check, the size that it determines, limit state."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from calibrate.errors import InputError
from calibrate.expressions import Comparison, dimension_of_comparison, infer_dimension, parse_comparison
from calibrate.study.model import Rule, Variable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.entries import Entry, read_entry, read_table
from calibrate.study.reading.names import CHECKS, LIMIT_STATES, NameSpace, check_name
from calibrate.study.reading.schema import RuleEntry
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import read_unit
from calibrate.units import Dimension, Unit, si_unit

_EXAMPLE = "A rule is a section such as [rules.bending] with design_check, sizes and limit_state."


@dataclass(slots=True)
class Draft:
    """A rule whose texts are parsed but not yet checked against the names of the study."""

    name: str
    place: Place
    entry: Entry[RuleEntry]
    design_check: Comparison | None = None
    limit_state: Comparison | None = None
    size: str | None = None
    size_unit: Unit | None = None


def parse_rules(
    reading: Reading, names: NameSpace, raw: Any, systems_have_weight: bool = False
) -> dict[str, Draft]:
    """Read every rule, parse its texts, and declare its size; some rule needs a weight unless a system has one."""
    section: Place = ("rules",)
    table = read_table(reading, raw, section)
    if not table and (raw is None or isinstance(raw, dict)):
        reading.raw_problem("at least one rule is needed.", section, _EXAMPLE)
    drafts = {name: _draft(reading, names, name, entry) for name, entry in table.items()}
    weights = [d.entry.content.weight for d in drafts.values() if d.entry.content is not None]
    if weights and len(weights) == len(drafts) and not (any(weights) or systems_have_weight):
        hint = "Give at least one rule, or a system of rules, a weight above 0."
        reading.raw_problem("every rule has weight 0.", section, hint)
    return drafts


def _draft(reading: Reading, names: NameSpace, name: str, raw: Any) -> Draft:
    place: Place = ("rules", name)
    check_name(reading, name, "rule", place)
    entry = read_entry(reading, RuleEntry, raw, place)
    draft = Draft(name, place, entry)
    # One key that is missing must not hide what is wrong with the others.
    content = entry.content
    texts = raw if isinstance(raw, dict) else {}
    draft.design_check = _comparison(reading, texts.get("design_check"), (*place, "design_check"))
    draft.limit_state = _comparison(reading, texts.get("limit_state"), (*place, "limit_state"))
    size = texts.get("sizes")
    if isinstance(size, str) and size.strip() and names.declare_size(name, size.strip(), (*place, "sizes")):
        draft.size = size.strip()
    if content is None:
        return draft
    draft.size_unit = read_unit(reading, content.size_unit, (*place, "size_unit"))
    if content.sizes is not None and content.design_check is None and "design_check" not in entry.dropped:
        reading.problem(
            f"names the size '{content.sizes}', but the rule has no design_check that could determine it.",
            (*place, "sizes"),
        )
    if content.size_unit is not None and content.sizes is None and "sizes" not in entry.dropped:
        reading.problem("is given, but the rule sizes nothing.", (*place, "size_unit"), "Add 'sizes'.")
    return draft


def _comparison(reading: Reading, text: Any, place: Place) -> Comparison | None:
    if not isinstance(text, str) or not text.strip():
        return None
    try:
        return parse_comparison(text)
    except InputError as error:
        reading.collect(error, place)
        return None


def check_designs(reading: Reading, names: NameSpace, drafts: Mapping[str, Draft]) -> None:
    """Check names and dimensions of the design checks, and note the dimension of each size."""
    for draft in drafts.values():
        implied = _implied_dimension(reading, names, draft) if draft.design_check is not None else None
        if draft.size is None:
            continue
        stated = None if draft.size_unit is None else draft.size_unit.dimension
        if implied is not None and stated is not None and implied != stated:
            assert draft.size_unit is not None
            reading.problem(
                f"'{draft.size_unit.text}' is {stated.describe()}, but the design check makes '{draft.size}' "
                f"{implied.describe()}.",
                (*draft.place, "size_unit"),
            )
            continue
        names.sizes[draft.name].dimension = stated or implied


def _implied_dimension(reading: Reading, names: NameSpace, draft: Draft) -> Dimension | None:
    """Return the dimension that the check gives to the size; None if there is none or with problems."""
    check, place = draft.design_check, (*draft.place, "design_check")
    assert check is not None
    used = set(check.left.names) | set(check.right.names)
    known = names.check_use(used - {draft.size}, place, CHECKS, draft.name)
    try:
        if draft.size is None:
            if known is not None:
                dimension_of_comparison(check, known)
            return None
        if draft.size not in used:
            reading.problem(
                f"does not contain the size '{draft.size}', so it cannot determine it.",
                place,
                "The size is the quantity for which the check is solved in each design situation.",
            )
            return None
        if known is None:
            return None
        implied = infer_dimension(check, known, draft.size)
    except InputError as error:
        reading.collect(error, place)
        return None
    if implied is None and (draft.entry.content is None or draft.entry.content.size_unit is None):
        reading.problem(
            f"does not imply the dimension of the size '{draft.size}'.",
            place,
            'Add size_unit, for example size_unit = "mm".',
        )
    return implied


def finish_rules(
    reading: Reading, names: NameSpace, drafts: Mapping[str, Draft], variables: Mapping[str, Variable | None]
) -> dict[str, Rule]:
    """Check the limit states; returns the rules that are sound."""
    rules: dict[str, Rule] = {}
    for draft in drafts.values():
        _check_limit_state(reading, names, draft, variables)
        content = draft.entry.content
        if draft.limit_state is None or content is None:
            continue
        if draft.design_check is not None and content.sizes is None:
            reading.doubt(
                "check-without-size",
                "The design check determines nothing, because the rule names no size with 'sizes'; the rule "
                "is assessed as it stands.",
                f"rules.{draft.name}",
            )
        rules[draft.name] = Rule(
            name=draft.name,
            design_check=draft.design_check,
            size=draft.size,
            size_unit=_shown_unit(names, draft),
            limit_state=draft.limit_state,
            variables=_variables_of(draft, variables),
            weight=content.weight,
            line=reading.line(draft.place),
            description=content.description.strip(),
        )
    return rules


def _shown_unit(names: NameSpace, draft: Draft) -> Unit | None:
    if draft.size is None or draft.size_unit is not None:
        return draft.size_unit
    dimension = names.sizes[draft.name].dimension
    return None if dimension is None else si_unit(dimension)


def _variables_of(draft: Draft, variables: Mapping[str, Variable | None]) -> tuple[str, ...]:
    used = set(limit_state_names(draft))
    while True:
        models = [v for name, v in variables.items() if name in used and v is not None]
        more = {n for v in models for e in v.arguments.values() for n in e.names} & set(variables) - used
        if not more:
            return tuple(name for name in variables if name in used)
        used |= more


def limit_state_names(draft: Draft) -> frozenset[str]:
    """Return the names in the limit state of a rule."""
    if draft.limit_state is None:
        return frozenset()
    return frozenset(draft.limit_state.left.names) | frozenset(draft.limit_state.right.names)


def _check_limit_state(
    reading: Reading, names: NameSpace, draft: Draft, variables: Mapping[str, Variable | None]
) -> None:
    if draft.limit_state is None:
        return
    place = (*draft.place, "limit_state")
    used = limit_state_names(draft)
    known = names.check_use(used, place, LIMIT_STATES, draft.name)
    if known is not None:
        try:
            dimension_of_comparison(draft.limit_state, known)
        except InputError as error:
            reading.collect(error, place)
    own = _variables_of(draft, variables)
    if not own and all(n in names.names or n == draft.size for n in used):
        reading.problem(
            "contains no basic variable, so there is nothing uncertain in it.",
            place,
            "Characteristic values belong in the design check, basic variables in the limit state.",
        )
    if draft.size is None or draft.size in used:
        return
    models = [variables[name] for name in own]
    if any(m is None or any(draft.size in e.names for e in m.arguments.values()) for m in models):
        return
    reading.problem(
        f"does not contain the size '{draft.size}' of the rule, so that no factor could change its "
        "reliability.",
        place,
        f"Use '{draft.size}' for what the design check determines, here or in a basic variable.",
    )
