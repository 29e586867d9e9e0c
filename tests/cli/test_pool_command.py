"""`treering pool`: every part of the analysis is printed, under its heading, with the options asked for."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom, norm
from statsmodels.stats.contingency_tables import StratifiedTable

PUBLISHED = Path(__file__).parents[1] / "published"
COUNTS = ["intervention_events", "intervention_total", "comparator_events", "comparator_total"]
EVERY_HEADING = [
    "Trials",
    "Pooled",
    "Counts",
    "Subgroups",
    "Regression",
    "Bayesian",
    "One-stage",
    "Without",
    "Influence",
    "Cumulative",
    "Asymmetry",
    "Absolute",
]


@pytest.fixture(scope="module")
def bcg() -> pd.DataFrame:
    """BCG trials (Colditz et al. 1994, JAMA 271:698) with their latitude, and two bands of it."""
    source = json.loads((PUBLISHED / "bcg_latitude.json").read_text())
    frame = pd.DataFrame(source["rows"], columns=source["columns"])
    frame.insert(0, "trial", [f"T{i + 1}" for i in range(len(frame))])
    return frame.assign(
        latitude=source["latitude"],
        band=["north" if degrees > 40 else "south" for degrees in source["latitude"]],
    )


@pytest.fixture
def pooled(run: Callable[..., Any], tmp_path: Path) -> Callable[..., Any]:
    """Pool a table with options; give what was printed, or the JSON when asked."""

    def call(table: pd.DataFrame, measure: str, *options: object) -> Any:
        file = tmp_path / "table.csv"
        table.to_csv(file, index=False)
        ran = run("pool", file, measure, *options)
        assert (ran.status, ran.err) == (0, "")
        return json.loads(ran.out, parse_constant=pytest.fail) if "--json" in options else ran.out

    return call


def section(text: str, heading: str) -> list[str]:
    """Give the lines under a heading."""
    found = re.search(rf"^{heading}\n((?:  .*\n)+)", text, flags=re.MULTILINE)
    assert found, heading
    return [line.strip() for line in found.group(1).splitlines()]


def test_every_part_has_its_section(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    options = ("--subgroup", "band", "--covariates", "latitude", "--comparator-risk", 0.02, "--mid", 0.8)
    text = pooled(bcg, "odds-ratio", *options, "--better", "lower")
    headings = [line for line in text.splitlines()[2:] if line and not line.startswith(" ")]
    assert headings == EVERY_HEADING
    assert len(section(text, "Without")) == len(section(text, "Influence")) == 13
    assert len(section(text, "Cumulative")) == 14
    assert len(section(text, "One-stage")) == 4
    assert "\x1b" not in text


def test_mantel_haenszel_printed_is_that_of_another_library(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    cells = [np.array([[a, n - a], [c, m - c]]) for a, n, c, m in bcg[COUNTS].to_numpy()]
    peer = StratifiedTable(cells)
    low, high = peer.oddsratio_pooled_confint()
    line, _ = section(pooled(bcg, "odds-ratio"), "Counts")
    assert line.startswith(f"Mantel-Haenszel: {peer.oddsratio_pooled:.4g} ({low:.4g} to {high:.4g}), ")


def test_peto_printed_is_the_published_odds_ratio(pooled: Callable[..., Any]) -> None:
    # Nissen and Wolski 2007, N Engl J Med 356:2457: 1.64 (0.98 to 2.74) for death from cardiovascular causes.
    source = json.loads((PUBLISHED / "rosiglitazone_cardiovascular_death.json").read_text())
    table = pd.DataFrame(source["rows"], columns=source["columns"])
    _, line = section(pooled(table, "odds-ratio", "--one-stage", "never"), "Counts")
    found = [float(word) for word in re.findall(r"[\d.]+", line)[:3]]
    assert found == pytest.approx([1.64, 0.98, 2.74], abs=0.006)


def test_the_regression_printed_is_the_published_one(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    # Borenstein et al. 2009, ch. 20 (from memory, firm): latitude -0.0292 with standard error 0.0067.
    options = ("--covariates", "latitude", "--tau2", "dersimonian-laird", "--interval", "wald")
    _, slope, *_ = section(pooled(bcg, "risk-ratio", *options), "Regression")
    found = [float(word) for word in re.findall(r"-?[\d.]+", slope)[:3]]
    assert found == pytest.approx([-0.0292, -0.0292 - 1.96 * 0.0067, -0.0292 + 1.96 * 0.0067], abs=2e-4)


def test_the_interaction_of_two_subgroups_is_the_test_of_their_difference(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    # Altman and Bland 2003, BMJ 326:219: difference over the root of the summed squared standard errors.
    found = pooled(bcg, "risk-ratio", "--subgroup", "band", "--interval", "wald", "--json")["subgroups"]
    alone = [
        pooled(bcg[bcg["band"] == band], "risk-ratio", "--interval", "wald", "--json")["random"]
        for band in ("north", "south")
    ]
    z = (alone[0]["estimate"] - alone[1]["estimate"]) / math.hypot(*(row["standard_error"] for row in alone))
    assert found["test_p"] == pytest.approx(2 * norm.sf(abs(z)), rel=1e-9)
    assert found["difference"]["z"] == pytest.approx(z, rel=1e-9)


def test_one_tau2_for_all_subgroups_is_an_option(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    text = pooled(bcg, "risk-ratio", "--subgroup", "band", "--between-variance", "common")
    north, south, interaction, *_ = section(text, "Subgroups")
    assert re.search(r"tau2 [\d.]+", north).group() == re.search(r"tau2 [\d.]+", south).group()
    assert "common tau2" in interaction


def test_leaving_a_trial_out_is_pooling_the_table_without_it(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    line = section(pooled(bcg, "risk-ratio"), "Without")[3]
    again = section(pooled(bcg.drop(index=3), "risk-ratio"), "Pooled")[0]
    (shown,) = re.findall(r"[\d.]+ \([\d.]+ to [\d.]+\)", line)
    assert line.startswith("without T4: ")
    assert shown in again


def test_trials_are_added_up_in_the_order_of_a_column(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    head, *steps = section(pooled(bcg, "risk-ratio", "--order", "latitude"), "Cumulative")
    names = [re.match(r"with (T\d+):", step).group(1) for step in steps]
    by_latitude = bcg.sort_values("latitude", kind="stable")["trial"].tolist()
    assert (head, names) == ("in the order of: latitude", by_latitude)
    assert "; 1 trial" in steps[0]


def test_one_trial_with_many_people_gives_the_normal_posterior(pooled: Callable[..., Any]) -> None:
    # With a prior that all but fixes tau at zero the posterior of one trial is its own normal distribution.
    table = pd.DataFrame([["A", 30, 200, 45, 200]], columns=["trial", *COUNTS])
    options = ("--prior", "half-normal 1e-6", "--better", "lower", "--mid", 0.8)
    lines = section(pooled(table, "risk-ratio", *options), "Bayesian")
    mean, error = math.log(30 / 45), math.sqrt(1 / 30 + 1 / 45 - 2 / 200)
    beyond = {"P(beyond no effect, lower is better)": 0.0, "P(beyond the MID)": math.log(0.8)}
    for words, limit in beyond.items():
        (line,) = (line for line in lines if line.startswith(words))
        found = float(re.match(r"[\d.]+", line.removeprefix(words + ": ")).group())
        assert found == pytest.approx(norm.cdf(limit, mean, error), abs=2e-4)


def test_a_published_prior_tells_its_source_and_that_it_was_recalled(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    text = pooled(bcg, "odds-ratio", "--prior", "turner-2015-mortality-drug-control")
    assert "Turner" in section(text, "Bayesian")[0]
    assert any("recalled" in note for note in section(text, "Notes"))


def test_double_zero_trials_inform_the_models_of_counts_that_can_use_them(
    pooled: Callable[..., Any],
) -> None:
    rows = [["A", 1, 100, 5, 100], ["B", 2, 120, 6, 118], ["C", 0, 90, 0, 91], ["D", 1, 80, 2, 80]]
    lines = section(pooled(pd.DataFrame(rows, columns=["trial", *COUNTS]), "odds-ratio"), "One-stage")
    informed = {line.split(":")[0]: re.search(r"(\d) of 4 trials", line).group(1) for line in lines}
    assert informed["hypergeometric-normal"] == "3"
    assert informed["binomial-normal-random-intercepts"] == informed["beta-binomial"] == "4"


@pytest.mark.parametrize(
    ("words", "found"), [("always", True), ("never", False), ("rare", False)], ids=lambda word: str(word)
)
def test_models_of_counts_are_for_rare_events_unless_asked_for(
    pooled: Callable[..., Any], words: str, found: bool
) -> None:
    total = 200
    events = binom.ppf([0.3, 0.5, 0.7], total, 0.4).astype(int)
    rows = [[f"T{i}", e, total, e + 6, total] for i, e in enumerate(events)]
    text = pooled(pd.DataFrame(rows, columns=["trial", *COUNTS]), "odds-ratio", "--one-stage", words)
    assert ("\nOne-stage\n" in text) is found
    assert ("not done: one stage: " in text) is not found


def test_small_studies_are_looked_at_with_ten_trials_or_when_forced_and_marked(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    few = bcg.head(6)
    silent = pooled(few, "odds-ratio")
    assert "\nAsymmetry\n" not in silent
    assert "not done: small study: 6 trials; such tests are read with 10 or more only" in silent
    mark, *lines = section(pooled(few, "odds-ratio", "--force-small-study"), "Asymmetry")
    assert mark.startswith("FORCED: fewer than ten trials")
    assert [line.split(":")[0] for line in lines] == [
        "Egger",
        "Peters",
        "Harbord",
        "rank correlation",
        "trim and fill",
    ]
    assert "FORCED" not in pooled(bcg, "odds-ratio")


def test_absolute_effects_are_stated_at_every_risk(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    risks = ("--comparator-risk", 0.01, "--comparator-risk", 0.2)
    low, high = section(pooled(bcg, "risk-ratio", *risks), "Absolute")
    ratio = math.exp(pooled(bcg, "risk-ratio", "--json")["random"]["estimate"])
    # Closed form: 1000 * comparator risk * (risk ratio - 1).
    assert low.startswith(f"per 1000 at a comparator risk of 0.01: {10 * (ratio - 1):.4g} (")
    assert high.startswith(f"per 1000 at a comparator risk of 0.2: {200 * (ratio - 1):.4g} (")


def test_the_prediction_interval_takes_the_degrees_of_freedom_asked_for(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    from scipy.stats import t

    widths = []
    for df in ("k-1", "k-2"):
        random = pooled(bcg, "risk-ratio", "--prediction-df", df, "--json")["random"]
        widths.append(random["prediction_high"] - random["prediction_low"])
    assert widths[0] / widths[1] == pytest.approx(t.ppf(0.975, 12) / t.ppf(0.975, 11), rel=1e-9)


def test_a_correction_has_the_size_asked_for(pooled: Callable[..., Any]) -> None:
    rows = [["A", 0, 40, 3, 42], ["B", 5, 60, 9, 58], ["C", 4, 55, 8, 61]]
    table = pd.DataFrame(rows, columns=["trial", *COUNTS])
    text = pooled(table, "odds-ratio", "--correction", "constant", "--correction-amount", 0.1)
    own = math.log(0.1 * 39.1 / (40.1 * 3.1))
    assert section(text, "Trials")[0].startswith(f"A: {math.exp(own):.4g} (")
    assert section(text, "Trials")[0].endswith("zero cell corrected")


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (("--subgroup", "ward"), "The table lacks a column that was asked for."),
        (("--covariates", "dose"), "The table lacks a column that was asked for."),
        (("--order", "year"), "The table lacks a column that was asked for."),
        (("--prior", "flat"), "Unknown prior of tau."),
        (("--prior", "half-normal wide"), "A prior is a name and numbers."),
        (("--prior", "half-normal 1 2"), "takes fewer numbers"),
        (("--prior", "half-normal"), "takes other parameters"),
        (("--mid", 1), "This is no minimally important difference."),
        (("--mid", -0.8), "This is no minimally important difference."),
        (("--better", "left"), "left"),
        (("--one-stage", "often"), "one_stage is not a known word."),
        (("--between-variance", "shared", "--subgroup", "band"), "shared"),
        (("--prediction-df", "k"), "prediction_df is not a known word."),
        (("--comparator-risk", 2), "comparator_risk"),
    ],
    ids=lambda value: " ".join(map(str, value)) if isinstance(value, tuple) else "",
)
def test_what_cannot_be_done_is_refused_with_the_reason(
    run: Callable[..., Any], tmp_path: Path, bcg: pd.DataFrame, options: tuple[Any, ...], words: str
) -> None:
    file = tmp_path / "table.csv"
    bcg.to_csv(file, index=False)
    ran = run("pool", file, "risk-ratio", *options)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


ROWS = [["A", 5, 100, 9, 100], ["B", 3, 80, 7, 82]]
HEAD = ",".join(["trial", *COUNTS])
PLAIN = "\n".join([HEAD, *(",".join(map(str, row)) for row in ROWS)]) + "\n"


@pytest.mark.parametrize(
    "text",
    [
        "\ufeff" + PLAIN,
        PLAIN.replace(",", ";"),
        PLAIN.replace(",", "\t"),
        PLAIN.replace("\n", "\r\n"),
        PLAIN.replace("\n", "\n\n") + ",,,,\n",
        PLAIN.replace(",", " , "),
        PLAIN.replace("intervention_events", "Intervention Events").replace("trial", "TRIAL"),
        PLAIN.replace("\n", ",\n"),
    ],
    ids=["bom", "semicolons", "tabs", "crlf", "blank lines", "spaces", "case", "trailing commas"],
)
def test_a_table_reads_the_same_however_a_spreadsheet_wrote_it(
    run: Callable[..., Any], tmp_path: Path, text: str
) -> None:
    file, plain = tmp_path / "odd.csv", tmp_path / "plain.csv"
    file.write_text(text, encoding="utf-8", newline="")
    plain.write_text(PLAIN, encoding="utf-8")
    assert run("pool", file, "risk-ratio") == run("pool", plain, "risk-ratio")


@pytest.mark.parametrize("mark", [";", "\t"], ids=["semicolons", "tabs"])
def test_decimal_commas_are_read_as_such_and_the_reader_is_told(
    run: Callable[..., Any], tmp_path: Path, mark: str
) -> None:
    file = tmp_path / "commas.csv"
    file.write_text("\n".join(["trial|estimate|standard_error", "A|-0,25|0,2"]).replace("|", mark))
    ran = run("pool", file, "generic")
    assert section(ran.out, "Trials")[0].startswith("A: -0.25 (-0.642 to 0.142)")
    assert "a comma inside a number was read as the decimal mark (-0,25)" in ran.err


@pytest.mark.parametrize(
    ("text", "words"),
    [
        # the numbers of such a row once moved one column on, the trial's name lost
        ("trial,estimate,standard_error\nA,0.1,0.2,0.3\n", "trial A: row 2 has more cells"),
        ("trial,estimate,estimate,standard_error\nA,0.1,0.2,0.3\n", "two columns have the same name"),
        ("trial;estimate;standard_error\nA;0,1;0.2\n", "a decimal comma and with a decimal point"),
        (HEAD.replace(",", ";") + "\nA;5;1,000;9;1,000\n", "may be thousands or a decimal comma"),
        (HEAD + '\nA,5,"1,000",9,100\n', "trial A: intervention_total: is not a number"),
        (HEAD + "\nA,NR,100,9,100\n", "trial A: intervention_events: is not a number"),
        (HEAD + "\n", "holds no trial"),
        ("", "holds no trial"),
    ],
)
def test_a_doubtful_table_is_refused_and_nothing_is_computed(
    run: Callable[..., Any], tmp_path: Path, text: str, words: str
) -> None:
    file = tmp_path / "doubtful.csv"
    file.write_text(text)
    ran = run("pool", file, "risk-ratio" if "total" in text else "generic")
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        (b"PK\x03\x04\x14\x00", "this is a workbook, not a CSV"),
        (b"trial,estimate\nM\xfcller,1\n", "not UTF-8 text"),
        (PLAIN.encode("utf-16"), "not UTF-8 text"),
    ],
)
def test_a_file_that_is_no_utf8_text_says_how_to_save_it(
    run: Callable[..., Any], tmp_path: Path, raw: bytes, words: str
) -> None:
    file = tmp_path / "table.csv"
    file.write_bytes(raw)
    ran = run("pool", file, "risk-ratio")
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err
    assert "Save the sheet as CSV (UTF-8)" in ran.err


def test_the_page_and_the_json_ask_for_a_statistician_and_recommend_nothing(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    said = [pooled(bcg, "risk-ratio").splitlines()[1], pooled(bcg, "risk-ratio", "--json")["caution"]]
    for words in said:
        assert "no treatment recommendation" in words
        assert "statistician" in words


def test_the_first_line_tells_level_estimator_and_interval(
    pooled: Callable[..., Any], bcg: pd.DataFrame
) -> None:
    first = pooled(bcg, "risk-ratio", "--level", 0.995, "--tau2", "paule-mandel").splitlines()[0]
    assert "intervals at 99.5%; random effects with tau2 by paule-mandel and modified-knapp" in first


def test_a_default_prior_is_not_called_chosen(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    assert "default, none was given" in section(pooled(bcg, "odds-ratio"), "Bayesian")[0]
    assert "(chosen)" in section(pooled(bcg, "odds-ratio", "--prior", "half-normal 0.5"), "Bayesian")[0]


@pytest.mark.parametrize(
    ("better", "mid", "shown"), [("lower", 0.8, "(MID 0.8)"), ("higher", 1.25, "(MID 1.25)")]
)
def test_the_difference_that_matters_is_shown_on_the_side_that_is_good(
    pooled: Callable[..., Any], bcg: pd.DataFrame, better: str, mid: float, shown: str
) -> None:
    assert shown in section(pooled(bcg, "risk-ratio", "--better", better, "--mid", mid), "Bayesian")[-1]


def test_rows_without_names_are_told(pooled: Callable[..., Any], bcg: pd.DataFrame) -> None:
    text = pooled(bcg.drop(columns="trial"), "risk-ratio")
    assert "note: The table has no column trial; trials are named by their row." in section(text, "Notes")


def test_help_names_every_measure_estimator_and_published_prior(run: Callable[..., Any]) -> None:
    from treering.pooling import EMPIRICAL_PRIORS
    from treering.terms import Measure, Tau2

    words = re.sub(r"[\s│]+", " ", run("pool", "--help").out)
    parts = {part for name in EMPIRICAL_PRIORS for part in re.split(r"(?=-drug-|-non-drug)", name)[1:]}
    for name in [*Measure, *Tau2, "turner-2012-any-outcome", "rhodes-2015-any-outcome", *parts]:
        assert name in words, name
