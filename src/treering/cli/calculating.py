"""Calculators: pool a table, boundaries for figures typed in, simulate this review's plan."""

from __future__ import annotations

from pathlib import Path

from treering.cli.output import EXIT_DONE, remark, say, say_json, say_table
from treering.terms import CAUTION


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
    measure: str,
    /,
    *,
    tau2: str = "reml",
    interval: str = "modified-knapp-hartung",
    level: float = 0.95,
    correction: str = "none",
    comparator_risk: float | None = None,
    force_small_study: bool = False,
    json: bool = False,
) -> int:
    """Pool a table of trials outside any review.

    Parameters
    ----------
    file : Path
        CSV with one row per trial; columns as in `treering template`, first column "trial".
    measure : str
        risk-ratio, odds-ratio, risk-difference, mean-difference and so on.
    tau2 : str
        Estimator of the between-trial variance.
    interval : str
        modified-knapp-hartung, knapp-hartung or wald.
    level : float
        Confidence level.
    correction : str
        For zero cells: none, constant or treatment-arm.
    comparator_risk : float, optional
        For effects per 1000 people.
    force_small_study : bool
        Do the small-study tests with fewer than ten trials, marked as such.
    json : bool
        Print JSON.
    """
    from treering.cli.tables import pooled_lines, read_table
    from treering.pooling import analyse_table

    result = analyse_table(
        read_table(file),
        measure,
        tau2=tau2,
        interval=interval,
        level=level,
        correction=correction,
        comparator_risk=comparator_risk,
        force_small_study=force_small_study,
    ).to_dict()
    if json:
        say_json(result)
    else:
        for line in pooled_lines(result):
            say(line)
    return EXIT_DONE
