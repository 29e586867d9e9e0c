"""Checks of the numbers of one result: what cannot be, and what is worth a second look."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import NamedTuple

import pandas as pd

from treering.effects import effect_sizes
from treering.effects.table import ROUTES
from treering.errors import AnalysisError
from treering.protocol import Outcome
from treering.terms import RATIO_MEASURES, Measure

ARMS = ("intervention", "comparator")
Numbers = Mapping[str, float | int]


class Finding(NamedTuple):
    """A field and a sentence about it."""

    field: str
    sentence: str


def number_faults(
    values: Numbers,
    outcome: Outcome,
    *,
    randomised: int | None = None,
    arms: Sequence[tuple[str, int | None]] = (),
) -> list[Finding]:
    """Find what can't be in the numbers of one usable result.

    Parameters
    ----------
    values : mapping of str to number
        The reported numbers by field.
    outcome : Outcome
        The outcome of the protocol, whose measure says what is needed.
    randomised : int, optional
        How many the trial randomised.
    arms : sequence of (side, randomised)
        Side and number randomised of each arm that was read.

    Returns
    -------
    list of Finding
        Empty if nothing stands against them; :func:`effect_faults` then lets the analysis try them.
    """
    return [
        *impossible_numbers(values, is_ratio=outcome.measure in RATIO_MEASURES),
        *_more_than_randomised(values, randomised),
        *_more_than_the_arms(values, arms),
        *_no_cluster_size(values),
        *_not_enough(values, outcome),
    ]


def impossible_numbers(values: Numbers, *, is_ratio: bool) -> list[Finding]:
    """Find numbers that can't be, whether or not the result is complete."""
    return [*_arm_faults(values), *_sign_faults(values), *_interval_faults(values, is_ratio)]


def _arm_faults(values: Numbers) -> list[Finding]:
    faults = []
    for arm in ARMS:
        events, total = values.get(f"{arm}_events"), values.get(f"{arm}_total")
        if total == 0:
            faults.append(Finding(f"{arm}_total", "an analysed arm has at least one person (found 0)."))
        elif events is not None and total is not None and events > total:
            sentence = f"{events} events are more than the {total} people of the arm."
            faults.append(Finding(f"{arm}_events", sentence))
    return faults


def _sign_faults(values: Numbers) -> list[Finding]:
    above_zero = [f"{arm}_{name}" for arm in ARMS for name in ("sd", "time")]
    above_zero += ["standard_error", "variance_oe"]
    limits: dict[str, tuple[float, float]] = {
        "p_value": (0.0, 1.0),
        "ci_level": (0.5, 0.9999),
        "icc": (0.0, 1.0),
        "mean_cluster_size": (1.0, math.inf),
    }
    faults = [
        Finding(name, f"this must be above 0 (found {values[name]}).")
        for name in above_zero
        if name in values and values[name] <= 0
    ]
    for name, (low, high) in limits.items():
        if name in values and not low <= values[name] <= high:
            bounds = f"from {low:g} to {high:g}" if math.isfinite(high) else f"at least {low:g}"
            faults.append(Finding(name, f"this must be {bounds} (found {values[name]})."))
    return faults


def _interval_faults(values: Numbers, is_ratio: bool) -> list[Finding]:
    low, high, middle = (values.get(name) for name in ("ci_low", "ci_high", "estimate"))
    faults = []
    if is_ratio:
        faults += [
            Finding(name, f"a ratio and its bounds are above 0 (found {values[name]}); no logs here.")
            for name in ("estimate", "ci_low", "ci_high")
            if name in values and values[name] <= 0
        ]
    if (low is None) != (high is None):
        missing = "ci_low" if low is None else "ci_high"
        return [*faults, Finding(missing, "an interval needs both of its bounds.")]
    if low is None or high is None:
        return faults
    if low >= high:
        return [*faults, Finding("ci_low", f"the lower bound {low} is not below the upper bound {high}.")]
    if middle is not None and not low < middle < high:
        faults.append(Finding("estimate", f"{middle} lies outside its own interval, {low} to {high}."))
    return faults


def _more_than_randomised(values: Numbers, randomised: int | None) -> list[Finding]:
    totals = [values.get(f"{arm}_total") for arm in ARMS]
    analysed = sum(total for total in totals if total is not None)
    if randomised is None or analysed <= randomised:
        return []
    return [Finding("intervention_total", f"{analysed} people analysed, but only {randomised} randomised.")]


def _more_than_the_arms(values: Numbers, arms: Sequence[tuple[str, int | None]]) -> Iterator[Finding]:
    """Find a side that analyses more people than its arms, joined, randomised."""
    for side in ARMS:
        sizes = [size for of, size in arms if of == side]
        total = values.get(f"{side}_total")
        if total is None or not sizes or None in sizes:
            continue
        joined = sum(size for size in sizes if size is not None)
        if total > joined:
            sentence = (
                f"{total} people analysed, but the {side} side randomised {joined}: nobody counts twice."
            )
            yield Finding(f"{side}_total", sentence)


def _no_cluster_size(values: Numbers) -> Iterator[Finding]:
    if "icc" in values and "mean_cluster_size" not in values:
        yield Finding("icc", "it allows for clustering only with mean_cluster_size beside it.")


def _not_enough(values: Numbers, outcome: Outcome) -> list[Finding]:
    """Find no route from the numbers to an effect."""
    routes = ROUTES[outcome.measure]
    if any(set(route.columns) <= values.keys() for route in routes):
        return []
    nearest = max(routes, key=lambda route: len(set(route.columns) & values.keys()) / len(route.columns))
    missing = [name for name in nearest.columns if name not in values]
    ways = "; or ".join(" ".join(route.columns) for route in routes)
    sentence = (
        f"a {outcome.measure.value} needs {ways}. Missing: {', '.join(missing)}. "
        "If the report does not give them, say so in not_usable: the trial stays listed."
    )
    return [Finding(missing[0], sentence)]


def effect_faults(results: Sequence[tuple[Numbers, Measure]]) -> list[Finding | None]:
    """Let the analysis itself try many results: what it would refuse later is refused now.

    Parameters
    ----------
    results : sequence of (numbers, measure)
        Results that :func:`number_faults` found nothing wrong with.

    Returns
    -------
    list of Finding or None
        One for each result, None where an effect can be computed.
    """
    found: list[Finding | None] = [None] * len(results)
    for measure in dict.fromkeys(measure for _, measure in results):
        places = [at for at, (_, of) in enumerate(results) if of == measure]
        for at, finding in _refused([(at, results[at][0]) for at in places], measure):
            found[at] = finding
    return found


def _refused(rows: list[tuple[int, Numbers]], measure: Measure) -> Iterator[tuple[int, Finding]]:
    """Find the rows that the analysis refuses, by halves: it takes a table whole and names one fault."""
    try:
        effect_sizes(
            pd.DataFrame([dict(values) for _, values in rows], index=[at for at, _ in rows]), measure
        )
    except AnalysisError as error:
        if len(rows) == 1:
            ((at, values),) = rows
            yield at, _as_finding(error, values)
            return
        middle = len(rows) // 2
        yield from _refused(rows[:middle], measure)
        yield from _refused(rows[middle:], measure)


def _as_finding(error: AnalysisError, values: Numbers) -> Finding:
    """Turn what the analysis refuses ("field: reason.") into a finding about that field."""
    named, _, reason = error.message.partition(": ")
    field = next((name for name in named.split(", ") if name in values), next(iter(values)))
    found = f" (found {error.found})" if error.found is not None else ""
    wanted = f"; expected {error.expected}" if error.expected is not None else ""
    return Finding(field, f"{(reason or named).rstrip('.')}{found}{wanted}.")
