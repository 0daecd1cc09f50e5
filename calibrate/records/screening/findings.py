"""What the checks found, in sentences."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Literal

from calibrate.records.screening.modes import NOT_STATED, FailureMode
from calibrate.records.screening.outliers import Esd, EsdStep, Influence
from calibrate.records.screening.repeats import Repeats, Tie
from calibrate.records.screening.tail import Tail
from calibrate.records.screening.trend import LEVEL, Trend
from calibrate.records.screening.unit_slips import Slip

COARSE = 0.02
"""Share of the variance from which rounding is mentioned."""

INFLUENTIAL = 0.25
"""Relative change of the coefficient of variation from which an unsuspected specimen is mentioned."""

ODD = 0.02
"""Chance of an extreme of a Weibull or Gumbel sample below which it is doubted; since the moments without the suspect
flatter the rest, 5 to 10 % of such samples are."""

Namer = Callable[[int], str]


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing to look at before the sample is used.

    Attributes
    ----------
    code : str
        Short stable name.
    level : {"note", "doubt"}
        Notes inform; doubts are recorded beside every number that rests on
        the sample.
    message : str
        Full sentences.
    specimens : tuple of int
        Whom it concerns, positions in the sample from 0; empty for all.
    """

    code: str
    level: Literal["note", "doubt"]
    message: str
    specimens: tuple[int, ...] = ()


def number(value: float) -> str:
    """Return a number for a sentence: four significant digits, no exponent where it can be helped."""
    text = f"{value:.4g}"
    return f"{value:.0f}" if "e+" in text and abs(value) < 1e9 else text


def tie_findings(repeats: Repeats, unit: str) -> Iterator[Finding]:
    """Tell equal values, rounding, and a sample without scatter."""
    if repeats.n_distinct == 1:
        yield Finding("no-scatter", "doubt", "All values are equal: the sample says nothing about scatter.")
        return
    for tie in repeats.ties:
        yield Finding("ties", "doubt", _tie_message(tie, unit), tie.specimens)
    if (
        repeats.rounding_share is not None
        and repeats.rounding_share >= COARSE
        and repeats.resolution is not None
    ):
        text = (
            f"All values are multiples of {_with(number(repeats.resolution), unit)}; rounding makes up about "
            f"{percent(repeats.rounding_share)} of the variance. "
            "Record more digits, or treat the values as intervals of that width."
        )
        yield Finding("coarse-rounding", "note", text)


def _tie_message(tie: Tie, unit: str) -> str:
    limit = {"maximum": "rig limit?", "minimum": "proof load or limit of detection?", "inside": "proof load?"}
    text = f"{tie.count} results share {_with(number(tie.value), unit)} ({limit[tie.position]})."
    told = []
    if tie.mean_now:
        if tie.mean_if_survivors is not None:
            told.append(
                f"Treat as survivors? The mean would rise by {_change(tie.mean_if_survivors, tie.mean_now)}."
            )
        if tie.mean_if_below is not None and tie.position == "minimum":
            told.append(
                f"Treat as below that value? The mean would fall by {_change(tie.mean_if_below, tie.mean_now)}."
            )
    return " ".join([text, *told])


def slip_findings(slips: Sequence[Slip], unit: str, against: str) -> Iterator[Finding]:
    """Tell medians that are off by a ratio of units; ``against`` names what was declared for the sample."""
    for slip in slips:
        times = f"{number(slip.ratio)} times" if slip.ratio >= 1.0 else f"1/{number(1.0 / slip.ratio)} of"
        who, what = (
            ("The median", against)
            if slip.lot is None
            else (f"The median of lot '{slip.lot}'", "the others'")
        )
        near = "; ".join(
            f"{text}: {number(f)}" for f, text in zip(slip.factors[:2], slip.units[:2], strict=True)
        )
        text = (
            f"{who} ({_with(number(slip.median), unit)}) is {times} {what} ({_with(number(slip.reference), unit)}). "
            f"Is it in another unit? Near that ratio: {near}."
        )
        yield Finding("unit-slip", "doubt", text, () if slip.lot is None else slip.specimens)


def declared_findings(
    mean: float, outside: tuple[int, ...], nominal: float | None, unit: str, name: Namer
) -> Iterator[Finding]:
    """Tell values outside the declared range, and a nominal strength above the mean."""
    if outside:
        text = f"{_specimens(outside, name)} {'lies' if len(outside) == 1 else 'lie'} outside the declared range."
        yield Finding("outside-range", "note", text, outside)
    if nominal is not None and nominal > mean:
        text = (
            f"The nominal value {_with(number(nominal), unit)} exceeds the sample mean "
            f"{_with(number(mean), unit)}. Is it a mean or a target strength?"
        )
        yield Finding("nominal-above-mean", "doubt", text)


def outlier_findings(tests: Sequence[Esd], influences: Sequence[Influence], name: Namer) -> Iterator[Finding]:
    """Tell suspects and the specimen that weighs most.

    A specimen is doubted that is an outlier on every scale on which it was
    tested, in the sample or within its lot, and would be one of a Weibull or
    Gumbel sample too.
    """
    for found in influences:
        i = found.specimen
        change = _influence_message(found, name)
        steps = {(t.within_lots, t.scale): s for t in tests for s in t.named if s.specimen == i}
        groups = {within: [t for t in tests if t.within_lots == within] for within in (False, True)}
        everywhere = [w for w, g in groups.items() if g and all((w, t.scale) in steps for t in g)]
        odd = [w for w in everywhere if all(_is_odd(steps[w, t.scale]) for t in groups[w])]
        if odd:
            where = "" if False in odd else " within its lot"
            text = (
                f"{change} Suspected as an outlier{where}. Show results with and without; "
                "removal needs a physical cause."
            )
            yield Finding("outlier", "doubt", text, (i,))
        elif everywhere:
            text = (
                f"{change} It is an outlier for a normal or lognormal population, "
                "not for one with a longer tail (Weibull below, Gumbel above). Removal needs a physical cause."
            )
            yield Finding("outlier", "note", text, (i,))
        elif steps:
            family, other = ("normal", "lognormal")
            scale = next(iter(steps))[1]
            if scale == "logarithmic":
                family, other = other, family
            text = (
                f"{change} It is an outlier on the {scale} scale only: odd for a {family} population, "
                f"not for a {other} one. Removal needs a physical cause."
            )
            yield Finding("outlier", "note", text, (i,))
        elif _share(found.cov, found.cov_without) > INFLUENTIAL:
            text = f"{change} That is not unusual in a sample of this size, but the result hangs on it."
            yield Finding("influential", "note", text, (i,))


def _is_odd(step: EsdStep) -> bool:
    return step.chance is not None and step.chance < ODD


def _share(with_it: float | None, without: float | None) -> float:
    return 0.0 if not with_it or without is None else abs(1.0 - without / with_it)


def _influence_message(found: Influence, name: Namer) -> str:
    text = f"Specimen {name(found.specimen)} ({number(found.value)})"
    if found.cov is not None and found.cov_without is not None:
        verb = "raises" if found.cov >= found.cov_without else "lowers"
        text += f" {verb} V from {found.cov_without:.3f} to {found.cov:.3f}"
    else:
        text += " lies far out"
    before, after, family = found.lognormal_fractile_without, found.lognormal_fractile, "lognormal"
    if before is None or after is None:
        before, after, family = found.normal_fractile_without, found.normal_fractile, "normal"
    if before > 0.0 and after != before:
        text += f" and {'cuts' if after < before else 'lifts'} the {family} 5 % fractile by {_change(after, before)}"
    return text + "."


def trend_findings(trend: Trend, unit: str, *, lots: bool) -> Iterator[Finding]:
    """Tell a drift in the order of testing."""
    if trend.p_value < LEVEL:
        text = (
            f"Values {'rise' if trend.tau > 0.0 else 'fall'} in the order of testing (Kendall's τ = {trend.tau:.2f}, "
            f"p = {trend.p_value:.2g}): {number(trend.slope)}{' ' + unit if unit else ''} a step "
            f"(95 % interval {number(trend.slope_low)} to {number(trend.slope_high)}). "
            f"Look for a drift of the rig or the production{', or a difference between lots' if lots else ''}."
        )
        yield Finding("trend", "doubt", text)
    if trend.runs_p_value is not None and trend.runs_p_value < LEVEL:
        expected = 1.0 + 2.0 * trend.n_above * trend.n_below / (trend.n_above + trend.n_below)
        kind = "come in clusters" if trend.n_runs < expected else "alternate"
        text = (
            f"Values above and below the median {kind} in the order of testing: {trend.n_runs} runs, "
            f"{expected:.1f} expected (p = {trend.runs_p_value:.2g})."
        )
        yield Finding("runs", "note", text)


def mode_findings(modes: Sequence[FailureMode]) -> Iterator[Finding]:
    """Tell that more than one failure mode stands in one sample."""
    if len(modes) > 1:
        counts = ", ".join(f"{m.name} {len(m.specimens)}" for m in modes)
        text = (
            f"The specimens failed in {len(modes)} modes ({counts}). "
            "Fit each mode with the other failures as right-censored; one distribution for all is a mixture."
        )
        yield Finding("failure-modes", "note", text)
    for m in modes:
        if m.name == NOT_STATED and len(modes) > 1:
            yield Finding(
                "mode-not-stated", "note", f"{len(m.specimens)} failures have no mode stated.", m.specimens
            )


def tail_findings(tail: Tail, unit: str) -> Iterator[Finding]:
    """Tell a lower tail that bends away."""
    if tail.bent:
        k = tail.straightest
        heavier = k.slope_ratio > 1.0
        shape = (
            f"{number(k.slope_ratio)} times" if heavier else f"only {number(max(k.slope_ratio, 0.0))} times"
        )
        cause = (
            "A second population (failure mode, damage, lot)?"
            if heavier
            else "Has the sample been graded, sorted or proof-loaded?"
        )
        text = (
            f"The lowest {percent(k.share)} (below {_with(number(k.value), unit)}) scatter {shape} as much as the "
            f"others suggest, on {k.paper} paper and on every other (p = {k.p_value:.2g}). {cause}"
        )
        yield Finding("two-branches", "doubt", text)


def percent(share: float) -> str:
    """Return a share in words."""
    return f"{100.0 * share:.0f} %" if share >= 0.0995 or share == 0.0 else f"{100.0 * share:.2g} %"


def _change(new: float, old: float) -> str:
    return percent(abs(new / old - 1.0))


def _with(text: str, unit: str) -> str:
    return f"{text} {unit}" if unit else text


def _specimens(at: Sequence[int], name: Namer) -> str:
    shown = ", ".join(name(i) for i in at[:5])
    more = f" and {len(at) - 5} others" if len(at) > 5 else ""
    return f"Specimen{'s' if len(at) > 1 else ''} {shown}{more}"
