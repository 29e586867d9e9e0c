"""Calculators: pool a table, boundaries for figures typed in, simulate this review's plan."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from textwrap import shorten

from treering.cli.output import EXIT_DONE, remark, say, say_json, say_table
from treering.errors import AnalysisError
from treering.terms import CAUTION, Measure


def boundaries(
    fractions: list[float] | None = None,
    /,
    *,
    looks: int | None = None,
    alpha: float = 0.05,
    power: float = 0.9,
    sides: int = 2,
    spending: str = "obrien-fleming",
    parameter: float | None = None,
    futility: bool = False,
    theta: float | None = None,
    comparator_risk: float | None = None,
    relative_reduction: float | None = None,
    odds_ratio: float | None = None,
    hazard_ratio: float | None = None,
    difference: float | None = None,
    sd: float | None = None,
    tau2: float | None = None,
    diversity: float = 0.0,
    json: bool = False,
) -> int:
    """Boundaries, spending and required information for figures typed in.

    Parameters
    ----------
    fractions : list of float, optional
        Information fractions, increasing, for example: 0.25 0.5 0.75 1.
    looks : int, optional
        Instead of fractions: this many looks at equal steps up to 1.
    alpha, power : float
        Error rate and power of the plan.
    sides : int
        1 or 2.
    spending : str
        obrien-fleming, pocock, power-family or hwang-shih-decani.
    parameter : float, optional
        Of the last two.
    futility : bool
        Add non-binding futility boundaries.
    theta : float, optional
        Effect to detect on the analysis scale (log for ratios).
    comparator_risk, relative_reduction, odds_ratio : float, optional
        Effect to detect of a binary outcome.
    hazard_ratio : float, optional
        Of a time-to-event outcome.
    difference, sd : float, optional
        Of a continuous outcome.
    tau2, diversity : float, optional
        Between-trial variance; D2, the allowance for heterogeneity.
    json : bool
        Print JSON.
    """
    from treering.monitoring import DetectableEffect, boundary_table

    table = boundary_table(
        fractions or None,
        looks=looks,
        alpha=alpha,
        power=power,
        sides=sides,
        spending=spending,
        parameter=parameter,
        futility=futility,
        effect=DetectableEffect(
            theta=theta,
            comparator_risk=comparator_risk,
            relative_reduction=relative_reduction,
            odds_ratio=odds_ratio,
            hazard_ratio=hazard_ratio,
            difference=difference,
            sd=sd,
            tau2=tau2,
            diversity=diversity,
        ),
    )
    found = table.as_dict()
    if json:
        say_json(found)
        return EXIT_DONE
    rows = [{str(name): value for name, value in row.items()} for row in table.looks.to_dict("records")]
    say_table(rows, {str(name): str(name).replace("_", " ") for name in table.looks.columns})
    for name, value in table.required.items():
        say(f"{name.replace('_', ' ')}: {value:.6g}")
    remark(f"Convention: {table.convention}.")
    remark(CAUTION)
    return EXIT_DONE


def pool(
    file: Path,
    measure: str | None = None,
    /,
    *,
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    prediction_df: str = "k-2",
    correction: str = "none",
    correction_amount: float = 0.5,
    subgroup: str | None = None,
    between_variance: str = "separate",
    covariates: list[str] | None = None,
    order: str | None = None,
    comparator_risk: list[float] | None = None,
    prior: str | None = None,
    better: str | None = None,
    mid: float | None = None,
    one_stage: str = "rare",
    force_small_study: bool = False,
    json: bool = False,
) -> int:
    """Pool a table of trials outside any review, in every way that fits its measure.

    Parameters
    ----------
    file : Path
        CSV with one row per trial, named in the column "trial". Binary: intervention_events,
        intervention_total, comparator_events, comparator_total. Rates: events, and time in the place of
        total. Continuous: mean, sd and total of both arms. As reported: estimate, ci_low, ci_high (ratios
        not logged); or estimate, standard_error for differences; or log_estimate, standard_error for ratios.
    measure : str, optional
        risk-ratio, odds-ratio, peto-odds-ratio, risk-difference, arcsine-difference, rate-ratio,
        hazard-ratio, mean-difference, standardized-mean-difference, ratio-of-means or generic. When left
        out, the usual one for the columns is taken and named.
    tau2 : str
        Between-trial variance by reml, ml, dersimonian-laird, paule-mandel, hedges, sidik-jonkman or
        hunter-schmidt; all are shown.
    interval : str
        modified-knapp-hartung, knapp-hartung or wald.
    level : float
        Confidence level.
    prediction_df : str
        Degrees of freedom of the prediction interval: k-2 or k-1.
    correction : str
        For zero cells: none, constant or treatment-arm.
    correction_amount : float
        Events added to each cell (constant), or half of what both arms get together.
    subgroup : str, optional
        Column with the subgroup; the column "subgroup" when there is one.
    between_variance : str
        Between-trial variance of the subgroups: separate or common.
    covariates : list of str, optional
        Columns of a meta-regression; give the option once for each.
    order : str, optional
        Column by which trials are added up; "date" or "year" when there is one.
    comparator_risk : list of float, optional
        For effects per 1000 people; give the option once for each risk.
    prior : str, optional
        Of tau: "half-normal 0.5", "half-cauchy 0.5", "log-normal MEAN SD" of log tau, or a published one:
        turner-2012-any-outcome; turner-2015- with mortality, semi-objective or subjective, then
        -drug-control, -drug-drug or -non-drug; rhodes-2015-any-outcome.
    better : str, optional
        Which direction is good: lower or higher.
    mid : float, optional
        Minimally important difference; for ratios as a ratio, for example 0.8.
    one_stage : str
        Models of the counts themselves: rare (when events are rare), always or never.
    force_small_study : bool
        Do the small-study tests with fewer than ten trials, marked as such.
    json : bool
        Print JSON.
    """
    from treering.cli.pooled import FOR_A_STATISTICIAN, pooled_lines
    from treering.cli.tables import read_table
    from treering.pooling import analyse_table, distance, read_prior

    table = read_table(file)
    for column in (subgroup, order, *(covariates or ())):
        if column is not None and column not in table.columns:
            raise AnalysisError("The table lacks a column that was asked for.", file=str(file), found=column)
    taken = measure or _usual(file, table.columns)
    result = analyse_table(
        table,
        taken,
        tau2=tau2,
        interval=interval,
        level=level,
        prediction_df=prediction_df,
        correction=correction,
        amount=correction_amount,
        subgroup=subgroup or "subgroup",
        between_variance=between_variance,
        covariates=covariates or (),
        order=order,
        comparator_risk=comparator_risk or None,
        prior=None if prior is None else read_prior(prior),
        better=better,
        mid=None if mid is None else distance(mid, taken),
        one_stage=one_stage,
        force_small_study=force_small_study,
    ).to_dict()
    if measure is None:
        result["warnings"].append(f"No measure was named; {taken} was taken, the usual one for such columns.")
    if "trial" not in table.columns:
        result["warnings"].append("The table has no column trial; trials are named by their row.")
    if json:
        say_json({"caution": FOR_A_STATISTICIAN, **result})
    else:
        for line in pooled_lines(result):
            say(line)
    return EXIT_DONE


def _usual(file: Path, columns: Iterable[str]) -> str:
    """Measure that is usual for the columns of a table."""
    from treering.effects import usual_measure

    found = usual_measure(columns)
    if found is None:
        raise AnalysisError(
            "No measure was named and the columns do not tell one.",
            file=str(file),
            found=shorten(", ".join(columns), 200),
            expected=f"one of {', '.join(Measure)}",
            next_step="Name the measure after the file.",
        )
    return str(found)
