"""Effects of trials with binary outcomes or event counts, on the analysis scale.

Every function takes checked :class:`~treering.effects.rows.Rows` and returns
:class:`~treering.effects.rows.Effects` of shape (k,).

Sources, formulas and equation numbers are cited from memory.
"""

from __future__ import annotations

import numpy as np

from treering.effects import checks, zero_cells
from treering.effects.rows import BoolArray, Effects, FloatArray, Rows, TextArray, refuse
from treering.terms import Correction

NO_EVENTS = "no event in either arm: says nothing about a relative effect"
ALL_EVENTS = "every participant of both arms had the event: says nothing about a relative effect"
ZERO_CELL = "a cell of the 2 by 2 table is zero and no correction is asked for: the ratio is undefined"
NO_EVENT_ARM = "no event in one arm and no correction is asked for: the ratio is undefined"
NO_VARIANCE = "the estimated variance is zero: no inverse-variance weight; use the Mantel-Haenszel method"


def _arms(rows: Rows) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    a, n1 = rows["intervention_events"], rows["intervention_total"]
    c, n2 = rows["comparator_events"], rows["comparator_total"]
    return a, n1, c, n2


def _reasons(*pairs: tuple[BoolArray, str]) -> TextArray:
    """Give the first reason that holds for each trial, or an empty text."""
    reasons = np.full(pairs[0][0].shape, "", dtype=object)
    for holds, reason in reversed(pairs):
        reasons[holds] = reason
    return reasons


def _undefined_as_nan(
    estimate: FloatArray, variance: FloatArray, undefined: BoolArray
) -> tuple[FloatArray, FloatArray]:
    return np.where(undefined, np.nan, estimate), np.where(undefined, np.nan, variance)


def log_risk_ratio(rows: Rows) -> Effects:
    r"""Log risk ratio.

    :math:`\log\{(a/n_1)/(c/n_2)\}`, variance :math:`1/a - 1/n_1 + 1/c - 1/n_2` (Katz, Baptista, Azen and Pike
    1978, Biometrics 34:469).

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.counts(rows)
    double, corrected_by_rule = _double_zero(rows), rows.correction is not Correction.NONE
    rows, corrected = zero_cells.corrected_rows(rows)
    a, n1, c, n2 = _arms(rows)
    undefined = (a == 0) | (c == 0)
    with np.errstate(divide="ignore", invalid="ignore"):
        estimate = np.log(a / n1) - np.log(c / n2)
        variance = (n1 - a) / (a * n1) + (n2 - c) / (c * n2)  # keeps digits where nearly all had the event
    full = (a == n1) & (c == n2)
    none = double & (not corrected_by_rule)
    reason = _reasons((none, NO_EVENTS), (undefined, NO_EVENT_ARM), (full, ALL_EVENTS))
    estimate, variance = _undefined_as_nan(estimate, variance, undefined | full)
    return Effects(estimate, variance, reason, corrected)


def log_odds_ratio(rows: Rows) -> Effects:
    r"""Log odds ratio.

    :math:`\log\{ad/(bc)\}`, variance :math:`1/a + 1/b + 1/c + 1/d` (Woolf 1955, Ann Hum Genet 19:251).

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.counts(rows)
    double = _double_zero(rows)
    full = (rows["intervention_events"] == rows["intervention_total"]) & (
        rows["comparator_events"] == rows["comparator_total"]
    )
    rows, corrected = zero_cells.corrected_rows(rows)
    a, n1, c, n2 = _arms(rows)
    b, d = n1 - a, n2 - c
    undefined = (a == 0) | (b == 0) | (c == 0) | (d == 0)
    with np.errstate(divide="ignore", invalid="ignore"):
        estimate = np.log(a) - np.log(b) - np.log(c) + np.log(d)
        variance = 1 / a + 1 / b + 1 / c + 1 / d
    reason = _reasons((double & undefined, NO_EVENTS), (full & undefined, ALL_EVENTS), (undefined, ZERO_CELL))
    estimate, variance = _undefined_as_nan(estimate, variance, undefined)
    return Effects(estimate, variance, reason, corrected)


def _double_zero(rows: Rows) -> BoolArray:
    zero: BoolArray = (rows["intervention_events"] == 0) & (rows["comparator_events"] == 0)
    return zero


def risk_difference(rows: Rows) -> Effects:
    r"""Risk difference.

    :math:`p_1 - p_2`, variance :math:`p_1(1-p_1)/n_1 + p_2(1-p_2)/n_2` (large-sample binomial variance; for
    instance Agresti, Categorical Data Analysis, section 3.1). Zero cells leave it defined, so no correction
    is ever applied. Where both arms have no or only events the estimated variance is zero, although the
    true one is not: the trial is listed as left out of inverse-variance pooling.

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    Effects
        Shape (k,), natural scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.counts(rows)
    a, n1, c, n2 = _arms(rows)
    p1, p2 = a / n1, c / n2
    variance = p1 * ((n1 - a) / n1) / n1 + p2 * ((n2 - c) / n2) / n2
    plain = Effects.plain(p1 - p2, variance)
    return Effects(plain.estimate, variance, _reasons((variance == 0, NO_VARIANCE)), plain.corrected)


def arcsine_difference(rows: Rows) -> Effects:
    r"""Arcsine difference, defined for every table with participants.

    :math:`\arcsin\sqrt{p_1} - \arcsin\sqrt{p_2}`, variance :math:`1/(4 n_1) + 1/(4 n_2)` (Rücker, Schwarzer,
    Carpenter and Olkin 2009, Stat Med 28:721).

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    Effects
        Shape (k,), radians.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.counts(rows)
    a, n1, c, n2 = _arms(rows)
    estimate = np.arcsin(np.sqrt(a / n1)) - np.arcsin(np.sqrt(c / n2))
    return Effects.plain(estimate, 1 / (4 * n1) + 1 / (4 * n2))


def observed_minus_expected(rows: Rows) -> tuple[FloatArray, FloatArray]:
    r"""Observed minus expected events of the intervention arm, and the hypergeometric variance.

    :math:`O-E = a - n_1 m/N` and :math:`V = n_1 n_2 m (N-m)/\{N^2 (N-1)\}` with m the events of both arms
    (Yusuf, Peto, Lewis, Collins and Sleight 1985, Prog Cardiovasc Dis 27:335).

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    tuple of ndarray
        O - E and V, shape (k,), in events.

    Raises
    ------
    AnalysisError
        If a trial has one participant in all.
    """
    a, n1, c, n2 = _arms(rows)
    events, total = a + c, n1 + n2
    refuse(total <= 1, rows.labels, "intervention_total", n1, "leaves one participant in all", "two or more")
    variance = n1 * n2 * events * (total - events) / (total**2 * (total - 1))
    return a - n1 * events / total, variance


def log_peto_odds_ratio(rows: Rows) -> Effects:
    """Peto's one-step log odds ratio (O - E)/V with variance 1/V; defined with one zero cell, uncorrected.

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_total comparator_events comparator_total``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.counts(rows)
    difference, information = observed_minus_expected(rows)
    undefined = information == 0
    with np.errstate(divide="ignore", invalid="ignore"):
        estimate, variance = difference / information, 1 / information
    reason = _reasons((_double_zero(rows), NO_EVENTS), (undefined, ALL_EVENTS))
    estimate, variance = _undefined_as_nan(estimate, variance, undefined)
    return Effects(estimate, variance, reason, np.zeros(undefined.shape, dtype=bool))


def log_rate_ratio(rows: Rows) -> Effects:
    r"""Log ratio of event rates.

    :math:`\log\{(a/T_1)/(c/T_2)\}`, variance :math:`1/a + 1/c` (Poisson counts; Rothman and Greenland, Modern
    Epidemiology). A correction adds events, not person-time; the treatment-arm correction goes by
    person-time.

    Parameters
    ----------
    rows : Rows, k trials
        With ``intervention_events intervention_time comparator_events comparator_time``.

    Returns
    -------
    Effects
        Shape (k,), log scale.

    Raises
    ------
    AnalysisError
        Naming the trial and the field, if a figure cannot be right.
    """
    checks.person_time(rows)
    a, t1 = rows["intervention_events"], rows["intervention_time"]
    c, t2 = rows["comparator_events"], rows["comparator_time"]
    zero, double = (a == 0) | (c == 0), _double_zero(rows)
    add1, add2 = zero_cells.correction_amounts(rows.correction, rows.amount, t1, t2)
    corrected = zero & (rows.correction is not Correction.NONE)
    a, c = a + np.where(zero, add1, 0.0), c + np.where(zero, add2, 0.0)
    undefined = (a == 0) | (c == 0)
    with np.errstate(divide="ignore", invalid="ignore"):
        estimate = np.log(a / t1) - np.log(c / t2)
        variance = 1 / a + 1 / c
    reason = _reasons((double & undefined, NO_EVENTS), (undefined, NO_EVENT_ARM))
    estimate, variance = _undefined_as_nan(estimate, variance, undefined)
    return Effects(estimate, variance, reason, corrected)
