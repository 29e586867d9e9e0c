"""A pooled table as lines for people: one section for each part, under a heading word."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from typing import Any

Part = dict[str, Any]

FOR_A_STATISTICIAN = (
    "These are calculations, no treatment recommendation. A statistician should read them before anyone "
    "relies on them."
)

WORDS = {
    "hypergeometric-normal": "conditional on the events of each trial",
    "binomial-normal-fixed-intercepts": "two binomials, an intercept for each trial",
    "binomial-normal-random-intercepts": "two binomials, intercepts vary over trials",
    "beta-binomial": "beta-binomial, arms not compared within trials",
}


def pooled_lines(result: Part) -> Iterator[str]:
    """Yield everything that `analyse_table` found, a section at a time.

    Parameters
    ----------
    result : dict
        ``TableAnalysis.to_dict()``.

    Yields
    ------
    str
        Lines; ratios on the ratio scale.
    """
    ratio = result["scale"] == "log"
    plan = result["options"]
    yield (
        f"{result['measure']}, {count(len(result['trials']))}; intervals at {100 * result['level']:.6g}%; "
        f"random effects with tau2 by {plan['tau2']} and {plan['interval']} interval"
    )
    yield FOR_A_STATISTICIAN
    sections = {
        "Trials": _trials(result, ratio),
        "Pooled": _pooled(result, ratio),
        "Counts": _counts(result),
        "Subgroups": _subgroups(result["subgroups"], ratio),
        "Regression": _regression(result["regression"], ratio),
        "Bayesian": _bayesian(result["bayesian"], ratio),
        "One-stage": _one_stage(result["one_stage"]),
        "Without": _without(result["leave_one_out"], ratio),
        "Influence": _influence(result["influence"]),
        "Cumulative": _cumulative(result["cumulative"], ratio),
        "Asymmetry": _asymmetry(result["small_study"], result["trim_and_fill"], ratio),
        "Absolute": _absolute(result["absolute"]),
        "Open": (f"not done: {name.replace('_', ' ')}: {why}" for name, why in result["not_done"].items()),
        "Notes": (f"note: {text}" for text in result["warnings"]),
    }
    for heading, lines in sections.items():
        found = list(lines)
        if found:
            yield f"\n{heading}"
            yield from (f"  {line}" for line in found)


def _trials(result: Part, ratio: bool) -> Iterator[str]:
    for trial in result["trials"]:
        mark = "; zero cell corrected" if trial["corrected"] else ""
        route = "" if trial["route"] == "as planned" else f"; {trial['route']}"
        weight = f"weight {trial['weight_random']:.1%}"
        yield f"{trial['trial']}: {interval(trial, ratio)}; {weight}{mark}{route}"
    for item in result["left_out"]:
        yield f"{item['trial']}: left out, {item['reason']}"


def _pooled(result: Part, ratio: bool) -> Iterator[str]:
    for name, words in (("random", "random effects"), ("common", "common effect")):
        if result[name] is not None:
            yield f"{words}: {interval(result[name], ratio)}, P {number(result[name]['p'])}"
    random = result["random"]
    if random is not None:
        yield (
            f"Q {number(random['q'])} on {number(random['q_df'])} df, P {number(random['q_p'])}; "
            f"tau2 {between(random, 'tau2')}; I2 {between(random, 'i2', share)}; "
            f"H2 {number(random['h2'])}; D2 {number(random['d2'])}"
        )
        ends = [natural(random[name], ratio) for name in ("prediction_low", "prediction_high")]
        known = random["prediction_low"] is not None
        yield f"prediction interval: {f'{ends[0]} to {ends[1]}' if known else 'not estimable'}"
    for name, pooled in result["estimators"].items():
        yield f"tau2 by {name}: {number(pooled['tau2'])}; {interval(pooled, ratio)}"


def _counts(result: Part) -> Iterator[str]:
    ratio = result["scale"] == "log"
    found = (("Mantel-Haenszel", result["mantel_haenszel"], ratio), ("Peto odds ratio", result["peto"], True))
    for name, pooled, log in found:
        if pooled is not None:
            yield (
                f"{name}: {interval(pooled, log)}, P {number(pooled['p'])}; "
                f"Q {number(pooled['q'])} on {number(pooled['q_df'])} df; {count(pooled['k'])} with weight"
            )


def _subgroups(found: Part | None, ratio: bool) -> Iterator[str]:
    if found is None:
        return
    for group in found["groups"]:
        yield (
            f"{group['label']}: {interval(group, ratio)}; {count(group['k'])}; "
            f"tau2 {number(group['tau2'])}; I2 {share(group['i2'])}"
        )
    rest = f" and {found['test_residual_df']}" if found["test_residual_df"] is not None else ""
    yield (
        f"interaction: {found['test_name']}, {number(found['test'])} on {found['test_df']}{rest} df, "
        f"P {number(found['test_p'])}"
    )
    gap = found["difference"]
    if gap is not None:
        ends = [natural(gap[name], ratio) for name in ("difference", "ci_low", "ci_high")]
        what = "ratio of the two ratios" if ratio else "difference of the two effects"
        yield f"{what}: {ends[0]} ({ends[1]} to {ends[2]})"
    yield from found["remarks"]


def _regression(found: Part | None, ratio: bool) -> Iterator[str]:
    if found is None:
        return
    scale = "log scale" if ratio else "analysis scale"
    for row in found["coefficients"]:
        yield f"{row['name']}: {interval(row, False)}, P {number(row['p'])} ({scale})"
    rest = f" and {found['test_residual_df']}" if found["test_residual_df"] is not None else ""
    kind = "chi-square" if found["test_residual_df"] is None else "F"
    test = f"{kind} {number(found['test'])} on {found['test_df']}{rest} df"
    yield f"all covariates: {test}, P {number(found['test_p'])}"
    yield (
        f"tau2 left {between(found, 'tau2')}, without covariates {number(found['tau2_without'])}; "
        f"share accounted for {number(found['r2'])}"
    )
    q = f"{number(found['q'])} on {number(found['q_df'])} df"
    yield f"residual Q {q}, P {number(found['q_p'])}"


def _bayesian(found: Part | None, ratio: bool) -> Iterator[str]:
    if found is None:
        return
    yield f"prior of tau: {found['prior']} ({found['prior_source']}); of the effect: {found['effect_prior']}"
    yield f"effect, median and credible interval: {interval(found, ratio)}"
    yield f"tau: {number(found['tau_median'])} ({number(found['tau_low'])} to {number(found['tau_high'])})"
    ends = [natural(found[name], ratio) for name in ("next_median", "next_low", "next_high")]
    yield f"next trial: {ends[0]} ({ends[1]} to {ends[2]})"
    yield (
        f"P(beyond no effect, {found['better']} is better): {number(found['p_benefit'])}; "
        f"next trial {number(found['p_next_benefit'])}"
    )
    if found["mid"] is not None:
        mid = natural(-found["mid"] if found["better"] == "lower" else found["mid"], ratio)
        yield (
            f"P(beyond the MID): {number(found['p_beyond_mid'])}; on the bad side "
            f"{number(found['p_harm_beyond_mid'])}; next trial {number(found['p_next_beyond_mid'])} "
            f"(MID {mid})"
        )


def _one_stage(found: dict[str, Part]) -> Iterator[str]:
    for name, fit in found.items():
        if fit["tau2"] is not None:
            spread = f"tau2 {number(fit['tau2'])}"
        else:
            spread = f"correlation {number(fit['correlation'])}"
        yield (
            f"{name}: {fit['measure']} {interval(fit, True)}, {fit['interval']}, P {number(fit['p'])}; "
            f"{spread}; {fit['k_informative']} of {fit['k']} trials inform it ({WORDS[name]})"
        )


def _without(rows: list[Part] | None, ratio: bool) -> Iterator[str]:
    for row in rows or ():
        yield f"without {row['trial']}: {interval(row, ratio)}; tau2 {number(row['tau2'])}"


def _influence(rows: list[Part] | None) -> Iterator[str]:
    for row in rows or ():
        yield (
            f"{row['trial']}: hat {number(row['hat'])}, residual {number(row['standardized_residual'])} "
            f"(studentized {number(row['studentized_residual'])}), DFFITS {number(row['dffits'])}, "
            f"Cook {number(row['cooks_distance'])}, covariance ratio {number(row['covariance_ratio'])}"
        )


def _cumulative(found: Part | None, ratio: bool) -> Iterator[str]:
    if found is None:
        return
    yield f"in the order of: {found['order']}"
    for row in found["steps"]:
        yield f"with {row['trial']}: {interval(row, ratio)}; {count(row['k'])}"


def _asymmetry(tests: Part | None, filled: Part | None, ratio: bool) -> Iterator[str]:
    if (tests or filled or {}).get("forced") or (filled or {}).get("few_trials"):
        yield "FORCED: fewer than ten trials; asked for all the same, and too few to be relied on"
    for name in ("egger", "peters", "harbord"):
        test = (tests or {}).get(name)
        if test is not None:
            yield (
                f"{name.capitalize()}: {test['tested']} {number(test[test['tested']])}, "
                f"standard error {number(test['standard_error'])}, t {number(test['t'])} on {test['df']} df, "
                f"P {number(test['p'])}; {count(test['k'])}"
            )
    rank = (tests or {}).get("rank_correlation")
    if rank is not None:
        yield f"rank correlation: Kendall's tau {number(rank['tau'])}, P {number(rank['p'])}"
    if filled is not None:
        side = f" on the {filled['side']}" if filled["added"] else ""
        yield (
            f"trim and fill: {filled['added']} added{side}; common effect then "
            f"{interval(filled['pooled'], ratio)}; a sensitivity analysis, no correction"
        )


def _absolute(rows: list[Part]) -> Iterator[str]:
    for effect in rows:
        cut = "; a risk was cut at 0 or 1: the measure does not fit this risk" if effect["cut"] else ""
        yield (
            f"per {effect['per']} at a comparator risk of {effect['comparator_risk']:g}: "
            f"{number(effect['difference'])} ({number(effect['difference_low'])} to "
            f"{number(effect['difference_high'])}) more events, fewer where below 0{cut}"
        )


def interval(row: Part, ratio: bool) -> str:
    """Return estimate and limits, on the ratio scale for ratios."""
    low, high = (natural(row[name], ratio) for name in ("ci_low", "ci_high"))
    return f"{natural(row['estimate'], ratio)} ({low} to {high})"


def number(value: float | None) -> str:
    """Return a number with four digits, or say that these data cannot give it."""
    return "not estimable" if value is None else f"{value:.4g}"


def share(value: float | None) -> str:
    """Return a share as a percentage, or say that these data cannot give it."""
    return number(value) if value is None else f"{value:.1%}"


def between(row: Part, name: str, show: Callable[[float | None], str] = number) -> str:
    """Return a number with its own interval, where the result has one."""
    return f"{show(row[name])} ({show(row[f'{name}_low'])} to {show(row[f'{name}_high'])})"


def natural(value: float | None, ratio: bool) -> str:
    """Return a number of the analysis scale as people read it."""
    return number(math.exp(value) if ratio and value is not None else value)


def count(k: int) -> str:
    """Return a number of trials with its noun."""
    return "1 trial" if k == 1 else f"{k} trials"
