"""From a study file to a validated study, or to every problem of the file at once."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from calibrate.errors import ProblemList, nearest
from calibrate.factors import PENALTIES
from calibrate.study.model import Objective, Study
from calibrate.study.paths import project_folder
from calibrate.study.reading import schema
from calibrate.study.reading.allowances import check_allowances
from calibrate.study.reading.bonds import bound, read_bonds
from calibrate.study.reading.combination import read_combination
from calibrate.study.reading.context import Reading
from calibrate.study.reading.correlations import read_correlations
from calibrate.study.reading.definitions import evaluate_quantities, read_definitions
from calibrate.study.reading.document import check_format, read_document
from calibrate.study.reading.entries import M, keys_of, read_entry, read_table
from calibrate.study.reading.evidence import read_blocks, read_declared, read_records
from calibrate.study.reading.exceedances import check_blocks
from calibrate.study.reading.factors import read_factors
from calibrate.study.reading.names import DERIVED, QUANTITIES, NameSpace, declare_all
from calibrate.study.reading.periods import check_target_period
from calibrate.study.reading.resistance import read_resistances
from calibrate.study.reading.rules import check_designs, finish_rules, parse_rules
from calibrate.study.reading.sites import read_sites
from calibrate.study.reading.situations import finish_situations, read_grid, read_weight
from calibrate.study.reading.subject import Surroundings
from calibrate.study.reading.systems import any_weight, read_systems
from calibrate.study.reading.unused import note_unused
from calibrate.study.reading.variables import read_variables
from calibrate.study.reading.verification import read_verification

_DERIVED = ("situations", "derived")


def read_study(path: str | Path, *, allow_outside: bool = False) -> Study:
    """Read and check a study file with everything that it names.

    Parameters
    ----------
    path : str or Path
        The study file (TOML).
    allow_outside : bool
        Whether the study may name files outside its project folder.

    Returns
    -------
    Study
        In SI units; records and tables are read, expressions parsed and their
        dimensions checked, the grid and its weights built.  Nothing is fitted,
        sized or computed beyond that.

    Raises
    ------
    InputError
        With all problems of the file, sorted by line.
    """
    document = read_document(path)
    problems = ProblemList(document.shown)
    reading = Reading(document, project_folder(document.path), allow_outside, problems)
    check_format(document, problems)
    data = document.data
    top = read_entry(reading, schema.TopLevel, data, ())
    sections: Mapping[str, Any] = {k: data.get(k) for k in keys_of(schema.TopLevel)}
    names = NameSpace(reading, incomplete=top.content is None)

    head = _required(reading, schema.StudySection, sections, "study")
    target = _required(reading, schema.TargetSection, sections, "target")

    # Every name is declared before any expression is checked, so that an
    # expression which uses something of the wrong kind can be told so.
    quantities_raw = read_table(reading, sections["quantities"], ("quantities",))
    declare_all(names, "quantity", quantities_raw, ("quantities",))
    variables_raw = read_table(reading, sections["variables"], ("variables",))
    declare_all(names, "variable", variables_raw, ("variables",))
    grid = read_grid(reading, names, sections["situations"])
    declare_all(names, "derived", grid.content.derived, _DERIVED)
    factors, factor_texts = read_factors(reading, names, sections["factors"])
    drafts = parse_rules(reading, names, sections["rules"], any_weight(sections["systems"]))

    own_records = read_records(reading, sections["records"])
    declared = read_declared(reading, sections["records"], own_records)
    resistances = read_resistances(reading, sections["resistance"], own_records)
    records = {**own_records, **{k: None if r is None else r.ratio for k, r in resistances.items()}}
    bonds = read_bonds(reading, quantities_raw, variables_raw, records, 0 if head is None else head.seed)
    typed = {k: v for k, v in quantities_raw.items() if k not in bonds.faulty}
    known = {k: bond.value for k, bond in bonds.found.items()}
    defined = read_definitions(reading, names, typed, ("quantities",), QUANTITIES, known)
    quantities = bound(evaluate_quantities(reading, defined), bonds.found)
    sites = read_sites(reading, names, sections["sites"])
    derived = read_definitions(reading, names, grid.content.derived, _DERIVED, DERIVED)
    weight = read_weight(reading, names, grid)
    situations = finish_situations(reading, grid, quantities, derived, weight)
    check_designs(reading, names, drafts)
    around = Surroundings(
        reading,
        names,
        records,
        quantities,
        {} if situations is None else situations.derived,
        grid,
        drafts,
        sites,
        resistances,
    )
    variables = read_variables(around, variables_raw)
    blocks = read_blocks(sections["records"], own_records)
    check_blocks(reading, variables, blocks, records)
    rules = finish_rules(reading, names, drafts, variables)
    expressions = {k: d.value.expression for k, d in {**defined, **derived}.items()}
    check_allowances(reading, rules, quantities, expressions, variables, records)
    combination = read_combination(
        reading, sections["combination"], variables, None if head is None else head.reference_period
    )
    correlations = read_correlations(
        reading, names, sections["correlations"], variables, records, combination
    )
    systems = read_systems(reading, sections["systems"], tuple(drafts), rules, variables, combination)
    check_target_period(reading, head, target)
    objective = _objective(reading, sections["objective"], target)
    verification = read_verification(reading, sections["verification"], objective)
    if not problems:
        note_unused(reading, names, factors, variables, own_records, sites)
    problems.stop_if_any()

    assert head is not None
    assert target is not None
    assert objective is not None
    assert verification is not None
    assert situations is not None
    return Study(
        path=document.path,
        shown=document.shown,
        project=reading.project,
        file=document.path.relative_to(reading.project).as_posix(),
        sha256=document.sha256,
        text=document.text,
        title=head.title,
        summary=head.summary.strip(),
        reference_period=head.reference_period,
        seed=head.seed,
        target_beta=target.beta,
        records={k: v for k, v in records.items() if v is not None},
        declared=declared,
        quantities={k: quantities[k] for k in quantities_raw},
        variables={k: v for k, v in variables.items() if v is not None},
        situations=situations,
        derived={k: derived[k].value.expression for k in grid.content.derived},
        rules=rules,
        factors=factors,
        objective=objective,
        verification=verification,
        weight_text="1" if weight is None else weight.text,
        lines=document.lines.dotted(),
        axes=grid.axes,
        table=None if grid.table is None else grid.table.file,
        size_dimensions={k: size.dimension for k, size in names.sizes.items() if size.dimension is not None},
        factor_descriptions=factor_texts,
        axis_descriptions=grid.descriptions,
        doubts=tuple(reading.doubts),
        combination=combination,
        correlations=correlations,
        systems=systems,
        sites={k: v for k, v in sites.items() if v is not None},
        resistances={k: v for k, v in resistances.items() if v is not None},
        blocks=blocks,
        other_periods=tuple(dict.fromkeys(head.other_periods)),
        independence=head.independence,
    )


def _required(reading: Reading, model: type[M], sections: Mapping[str, Any], name: str) -> M | None:
    if sections[name] is None:
        needed = ", ".join(f"'{k}'" for k, f in model.model_fields.items() if f.is_required())
        reading.raw_problem(f"the section [{name}] with {needed} is missing.", ())
        return None
    entry = read_entry(reading, model, sections[name], (name,))
    return entry.content if entry.sound else None


def _objective(reading: Reading, raw: Any, target: schema.TargetSection | None) -> Objective | None:
    entry = read_entry(reading, schema.ObjectiveSection, {} if raw is None else raw, ("objective",))
    content = entry.content
    if content is None:
        return None
    if content.penalty not in PENALTIES:
        known = ", ".join(f"'{p}'" for p in PENALTIES)
        close = nearest(content.penalty, PENALTIES)
        reading.problem(
            f"must be one of {known}; got the text '{content.penalty}'.",
            ("objective", "penalty"),
            f"Did you mean '{close}'?" if close else None,
        )
    if content.d is not None and content.penalty in PENALTIES and content.penalty != "asymmetric":
        reading.problem(
            f"is the scale of the penalty 'asymmetric'; the penalty '{content.penalty}' has none.",
            ("objective", "d"),
        )
    if target is not None and content.floor is not None and content.floor > target.beta:
        reading.doubt(
            "floor-above-target",
            f"The floor {content.floor:g} is above the target {target.beta:g}, so no situation may be "
            "near the target from below.",
            "objective.floor",
        )
    if content.d is None:
        return Objective(content.penalty, content.floor, index=content.index)
    return Objective(content.penalty, content.floor, content.d, content.index)
