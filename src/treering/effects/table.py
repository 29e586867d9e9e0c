"""One table of trials to estimates and variances on the analysis scale.

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd

from treering.effects import binary, checks, columns, continuous, reported, time_to_event
from treering.effects.rows import BoolArray, Effects, FloatArray, LeftOut, Rows, TextArray, refuse
from treering.effects.zero_cells import COUNTS
from treering.errors import AnalysisError
from treering.terms import RATIO_MEASURES, Correction, Measure

MEANS = tuple(f"{arm}_{field}" for arm in checks.ARMS for field in ("mean", "sd", "total"))
RATES = ("intervention_events", "intervention_time", "comparator_events", "comparator_time")
INTERVAL = ("estimate", "ci_low", "ci_high")


@dataclass(frozen=True)
class Route:
    """One way from reported columns to an effect.

    Parameters
    ----------
    name : str
        What the route starts from, in words.
    columns : tuple of str
        Columns that a trial must report in full.
    compute : callable
        From complete rows to effects.
    """

    name: str
    columns: tuple[str, ...]
    compute: Callable[[Rows], Effects]


_RATIO = (
    Route("ratio and interval", INTERVAL, reported.ratio_from_interval),
    Route("log ratio and standard error", ("log_estimate", "standard_error"), reported.from_log_estimate),
)
_LOG_RANK = Route(
    "observed minus expected",
    ("observed_minus_expected", "variance_oe"),
    time_to_event.from_observed_minus_expected,
)
_DIFFERENCE = (
    Route("estimate and interval", INTERVAL, reported.difference_from_interval),
    Route("estimate and standard error", ("estimate", "standard_error"), reported.from_standard_error),
)

# What a trial reports in full comes first; a reported effect stands in where the arms are not reported.
ROUTES: dict[Measure, tuple[Route, ...]] = {
    Measure.RISK_RATIO: (Route("counts", COUNTS, binary.log_risk_ratio), *_RATIO),
    Measure.ODDS_RATIO: (Route("counts", COUNTS, binary.log_odds_ratio), *_RATIO),
    Measure.PETO_ODDS_RATIO: (Route("counts", COUNTS, binary.log_peto_odds_ratio), _LOG_RANK),
    Measure.RISK_DIFFERENCE: (Route("counts", COUNTS, binary.risk_difference), *_DIFFERENCE),
    Measure.ARCSINE_DIFFERENCE: (Route("counts", COUNTS, binary.arcsine_difference),),
    Measure.RATE_RATIO: (Route("events and time", RATES, binary.log_rate_ratio), *_RATIO),
    Measure.MEAN_DIFFERENCE: (Route("means", MEANS, continuous.mean_difference), *_DIFFERENCE),
    Measure.STANDARDIZED_MEAN_DIFFERENCE: (
        Route("means", MEANS, continuous.standardized_mean_difference),
        *_DIFFERENCE,
    ),
    Measure.RATIO_OF_MEANS: (Route("means", MEANS, continuous.log_ratio_of_means), *_RATIO),
    Measure.HAZARD_RATIO: (
        *_RATIO,
        _LOG_RANK,
        Route("ratio and P value", ("estimate", "p_value"), reported.ratio_from_p),
        Route(
            "log-rank P value and events",
            ("p_value", "intervention_events", "comparator_events", "lower_hazard"),
            time_to_event.from_log_rank_p,
        ),
    ),
    Measure.GENERIC: _DIFFERENCE,
}


def effect_sizes(
    table: pd.DataFrame, measure: str, *, correction: str = "none", amount: float = 0.5
) -> pd.DataFrame:
    """Estimate and variance of every trial on the analysis scale (the log for ratios).

    For each trial the first route is taken whose columns it reports in full, so a table may mix trials with
    arm-level figures and trials with only a reported effect:

    ==============================================  ====================================================
    measures                                        columns
    ==============================================  ====================================================
    risk-ratio odds-ratio risk-difference           intervention_events intervention_total
    peto-odds-ratio arcsine-difference              comparator_events comparator_total
    mean-difference standardized-mean-difference    intervention_mean intervention_sd intervention_total
    ratio-of-means                                  comparator_mean comparator_sd comparator_total
    rate-ratio                                      intervention_events intervention_time
                                                    comparator_events comparator_time
    hazard-ratio, and ratios                        estimate ci_low ci_high (natural scale), or
    without arm-level figures                       log_estimate standard_error
    hazard-ratio and peto-odds-ratio                observed_minus_expected variance_oe
    hazard-ratio                                    estimate p_value, or p_value intervention_events
                                                    comparator_events lower_hazard (name of the arm)
    generic, and differences                        estimate ci_low ci_high, or
    without arm-level figures                       estimate standard_error
    ==============================================  ====================================================

    ``ci_level`` gives the level of the intervals where it is not 0.95. Totals and events may be effective
    (broken) numbers of a cluster trial.

    Parameters
    ----------
    table : DataFrame, k rows
        One row for each trial (contrast); its index is kept.
    measure : str
        A :class:`~treering.terms.Measure`.
    correction : str
        What is done with a trial that has a zero cell, on risk-ratio, odds-ratio and rate-ratio: "none",
        "constant" or "treatment-arm" (Sweeting, Sutton and Lambert 2004, Stat Med 23:1351). Risk difference,
        arcsine difference and Peto's odds ratio need none and never take one.
    amount : float
        Events added to each cell, or half the sum of both arms' corrections.

    Returns
    -------
    DataFrame, k rows
        ``estimate`` and ``variance``. Both are NaN only where a relative measure is undefined for want of
        events and no correction was asked for. ``attrs["left_out"]`` lists these trials, and those whose
        estimated variance is zero, each by its label with the reason (tuple of
        :class:`~treering.effects.rows.LeftOut`). ``attrs["corrected"]`` lists the corrected trials,
        ``attrs["reported"]`` those that came by another route than the first, with its name.

    Raises
    ------
    AnalysisError
        Naming the first faulty trial and the field, if anything else is wrong; nothing is skipped.
    """
    known = _known_measure(measure)
    rule = checks.known_correction(correction)
    size = checks.known_amount(amount)
    table = columns.as_table(table)
    if len(table) == 0:
        raise AnalysisError("The table holds no trial.", expected="one row or more")
    labels = columns.trial_labels(table)
    routes = _open_routes(table, known)
    values = _read(table, routes, labels)
    effects, taken = _by_route(values, labels, routes, rule, size)
    _finite(effects, labels)
    return _frame(table.index, labels, effects, taken, known, rule)


def usable(
    table: pd.DataFrame, measure: str, *, correction: str = "none", amount: float = 0.5
) -> pd.DataFrame:
    """Rows of :func:`effect_sizes` that inverse-variance pooling can take; the rest stand in ``attrs``.

    Parameters
    ----------
    table, measure, correction, amount : DataFrame, str, str, float
        As for :func:`effect_sizes`.

    Returns
    -------
    DataFrame
        ``estimate`` and ``variance`` (above zero) of the usable trials; may have no row.
        ``attrs["left_out"]`` names the others with the reason.

    Raises
    ------
    AnalysisError
        As :func:`effect_sizes`.
    """
    effects = effect_sizes(table, measure, correction=correction, amount=amount)
    kept = effects[effects["variance"].to_numpy() > 0]
    kept.attrs = dict(effects.attrs)
    return kept


def _known_measure(measure: str) -> Measure:
    try:
        return Measure(measure)
    except ValueError:
        raise AnalysisError("The measure is unknown.", found=measure, expected=", ".join(Measure)) from None


def _open_routes(table: pd.DataFrame, measure: Measure) -> tuple[Route, ...]:
    """Routes of which the table has every column."""
    found = tuple(route for route in ROUTES[measure] if set(route.columns) <= set(table.columns))
    if found:
        return found
    present = [np.mean([field in table.columns for field in route.columns]) for route in ROUTES[measure]]
    nearest = ROUTES[measure][int(np.argmax(present))]
    missing = [field for field in nearest.columns if field not in table.columns]
    ways = "; or ".join(" ".join(route.columns) for route in ROUTES[measure])
    raise AnalysisError(f"{missing[0]}: the column is missing for measure {measure}.", expected=ways)


def _read(table: pd.DataFrame, routes: tuple[Route, ...], labels: TextArray) -> dict[str, FloatArray]:
    """All columns that an open route needs, as numbers with NaN where nothing is reported."""
    fields = {field: None for route in routes for field in route.columns}
    values = {field: _read_column(table, field, labels) for field in fields}
    level = np.full(len(table), 0.95)
    if "ci_level" in table.columns:
        given = columns.read_numbers(table, "ci_level", labels)
        level = np.where(np.isnan(given), level, given)
    values["ci_level"] = level
    return values


def _read_column(table: pd.DataFrame, field: str, labels: TextArray) -> FloatArray:
    """Read one column; a figure below zero that cannot be is a fault even where another route is taken."""
    if field == "lower_hazard":
        return _signs(table, labels)
    from_zero = field.startswith(checks.ARMS) and not field.endswith("_mean")
    return (columns.read_counts if from_zero else columns.read_numbers)(table, field, labels)


def _signs(table: pd.DataFrame, labels: TextArray) -> FloatArray:
    """Read the arm with the lower hazard as a sign of the log hazard ratio."""
    column = columns.column(table, "lower_hazard")
    words = column.to_numpy(dtype=object)
    known = {"intervention": -1.0, "comparator": 1.0}
    signs = np.array([known.get(word, np.nan) if isinstance(word, str) else np.nan for word in words])
    unknown = np.isnan(signs) & column.notna().to_numpy()
    refuse(unknown, labels, "lower_hazard", words, "names no arm", " or ".join(checks.ARMS))
    return signs


def _by_route(
    values: dict[str, FloatArray],
    labels: TextArray,
    routes: tuple[Route, ...],
    correction: Correction,
    amount: float,
) -> tuple[Effects, TextArray]:
    """Effects of all rows, each by the first route that it reports in full, and the names of the routes."""
    k = len(labels)
    out = Effects.plain(np.full(k, np.nan), np.full(k, np.nan))
    taken = np.full(k, "", dtype=object)
    for route in routes:
        full = np.logical_and.reduce([~np.isnan(values[field]) for field in route.columns]) & (taken == "")
        if not full.any():
            continue
        part = {field: values[field][full] for field in (*route.columns, "ci_level")}
        with np.errstate(all="ignore"):
            effects = route.compute(Rows(part, labels[full], correction, amount))
        out.estimate[full], out.variance[full] = effects.estimate, effects.variance
        out.reason[full], out.corrected[full] = effects.reason, effects.corrected
        taken[full] = route.name
    _all_taken(values, labels, routes, taken == "")
    return out, taken


def _all_taken(
    values: dict[str, FloatArray], labels: TextArray, routes: tuple[Route, ...], left: BoolArray
) -> None:
    """Refuse the first trial that no route could take, naming the field it lacks on the nearest route."""
    if not left.any():
        return
    at = int(np.argmax(left))
    present = [np.mean([not np.isnan(values[field][at]) for field in route.columns]) for route in routes]
    nearest = routes[int(np.argmax(present))]
    field = next(field for field in nearest.columns if np.isnan(values[field][at]))
    here = np.arange(len(labels)) == at
    refuse(here, labels, field, lambda _: "nothing", "is missing", " ".join(nearest.columns))


def _finite(effects: Effects, labels: TextArray) -> None:
    """Nothing infinite or NaN leaves without a stated reason."""
    silent = effects.reason == ""
    estimate, variance = effects.estimate, effects.variance
    refuse(silent & ~np.isfinite(estimate), labels, "estimate", estimate, "is not finite", "a finite number")
    refuse(
        silent & ~(np.isfinite(variance) & (variance > 0)),
        labels,
        "variance",
        variance,
        "is not finite and above zero",
        "a variance above zero",
    )


def _frame(
    index: pd.Index,
    labels: TextArray,
    effects: Effects,
    taken: TextArray,
    measure: Measure,
    rule: Correction,
) -> pd.DataFrame:
    out = pd.DataFrame({"estimate": effects.estimate, "variance": effects.variance}, index=index)
    left = np.flatnonzero(effects.reason != "")
    other = np.flatnonzero(taken != ROUTES[measure][0].name)
    out.attrs = {
        "measure": str(measure),
        "scale": "log" if measure in RATIO_MEASURES else "natural",
        "correction": str(rule),
        "left_out": tuple(LeftOut(labels[at], str(effects.reason[at])) for at in left),
        "corrected": tuple(labels[at] for at in np.flatnonzero(effects.corrected)),
        "reported": tuple((labels[at], str(taken[at])) for at in other),
    }
    return out
