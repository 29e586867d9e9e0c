"""A new review folder, and blank forms for it."""

from __future__ import annotations

import csv
import io
import json
from importlib.resources import files
from pathlib import Path

from treering.errors import TreeringError
from treering.protocol import Outcome, Protocol
from treering.terms import Measure

FOLDERS = ("config", "intake", "store", "reports")
_COUNTS = ("intervention_events", "intervention_total", "comparator_events", "comparator_total")
_TIMES = ("intervention_events", "intervention_time", "comparator_events", "comparator_time")
_MEANS = (
    "intervention_mean",
    "intervention_sd",
    "intervention_total",
    "comparator_mean",
    "comparator_sd",
    "comparator_total",
)
#: The numbers that an extraction needs for each measure.
FIELDS_OF = {
    Measure.RISK_RATIO: _COUNTS,
    Measure.ODDS_RATIO: _COUNTS,
    Measure.RISK_DIFFERENCE: _COUNTS,
    Measure.PETO_ODDS_RATIO: _COUNTS,
    Measure.ARCSINE_DIFFERENCE: _COUNTS,
    Measure.MEAN_DIFFERENCE: _MEANS,
    Measure.STANDARDIZED_MEAN_DIFFERENCE: _MEANS,
    Measure.RATIO_OF_MEANS: _MEANS,
    Measure.RATE_RATIO: _TIMES,
    Measure.HAZARD_RATIO: ("estimate", "ci_low", "ci_high"),
    Measure.GENERIC: ("estimate", "standard_error"),
}


def start_review(folder: Path) -> list[Path]:
    """Make the folders of a new review with blank, commented config files.

    Parameters
    ----------
    folder : Path
        Where the review goes; files that are there already are never touched.

    Returns
    -------
    list of Path
        The config files.

    Raises
    ------
    TreeringError
        When a review is there already.
    """
    config = folder / "config"
    if (config / "review.toml").exists():
        raise TreeringError(
            "a review is there already.", file=str(config / "review.toml"), next_step="Name another folder."
        )
    try:
        for name in FOLDERS:
            (folder / name).mkdir(parents=True, exist_ok=True)
        made = []
        for name in ("review.toml", "panel.toml"):
            text = files("treering.update").joinpath("blank", name).read_text(encoding="utf-8")
            with (config / name).open("x", encoding="utf-8") as file:
                file.write(text)
            made.append(config / name)
    except OSError as error:
        raise TreeringError(f"the folder can't be written to: {error.strerror}.", file=str(folder)) from error
    return made


def blank_form(protocol: Protocol, trial: str, extractor: str, form: str) -> str:
    """Write a blank extraction form for every outcome of the protocol.

    Parameters
    ----------
    protocol : Protocol
        Gives outcomes and measures.
    trial, extractor : str
        Filled in at the top.
    form : str
        "toml" or "csv".

    Returns
    -------
    str
        The text of the form; a field left empty means not reported, 0 means that zero was reported.

    Raises
    ------
    TreeringError
        When the person is not in the protocol, or the form is not known.
    """
    if protocol.person(extractor) is None:
        raise TreeringError(
            "the extractor is not in the protocol.",
            found=extractor,
            expected=", ".join(person.id for person in protocol.people),
        )
    if form == "toml":
        return _toml_form(protocol, trial, extractor)
    if form == "csv":
        return _csv_form(protocol, trial, extractor)
    raise TreeringError("there is no such form.", found=form, expected="toml or csv")


def _toml_form(protocol: Protocol, trial: str, extractor: str) -> str:
    lines = [
        "# One person's reading of one report. Take the # away from a line and fill it in;",
        "# a line that stays out means 'not reported', 0 means that zero was reported.",
        'record = "extraction"',
        f"trial = {json.dumps(trial)}",
        f"extractor = {json.dumps(extractor)}",
        '# title = ""',
        "# published = 2026-01-31",
        "# randomised =",
        '# design = "parallel"              # parallel, cluster or crossover',
        "",
        "[report]",
        f"id = {json.dumps(trial + '-main')}",
        '# citation = ""',
    ]
    if names := sorted({name for outcome in protocol.outcomes for name in outcome.subgroups}):
        lines += ["", "[subgroups]", *(f'# {name} = ""' for name in names)]
    for outcome in protocol.outcomes:
        lines += [
            "",
            f"# {_about(outcome)}; take this part out when the report does not give it",
            "[[results]]",
        ]
        lines += [f"outcome = {json.dumps(outcome.id)}"]
        lines += [f"# {field} =" for field in FIELDS_OF[outcome.measure]]
        lines += ['# locator = ""                     # table, figure or page']
    return "\n".join(lines) + "\n"


def _about(outcome: Outcome) -> str:
    unit = f", {outcome.unit}" if outcome.unit else ""
    return f"{outcome.title}{unit} ({outcome.measure.value})"


def _csv_form(protocol: Protocol, trial: str, extractor: str) -> str:
    head = ["trial", "title", "published", "randomised", "report", "citation", "extractor", "outcome"]
    fields = list(dict.fromkeys(f for outcome in protocol.outcomes for f in FIELDS_OF[outcome.measure]))
    groups = sorted({f"subgroup:{name}" for outcome in protocol.outcomes for name in outcome.subgroups})
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([*head, *fields, "locator", *groups])
    blanks = [""] * (len(fields) + 1 + len(groups))
    for outcome in protocol.outcomes:
        writer.writerow([trial, "", "", "", f"{trial}-main", "", extractor, outcome.id, *blanks])
    return text.getvalue()
