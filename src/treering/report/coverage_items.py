"""The reporting items a version is checked against, in our own words.

PRISMA 2020 (Page et al., BMJ 2021;372:n71) with the additions for living reviews (PRISMA-LSR, BMJ
2024;387:e079183; L1 was read in its table, the placement of L2 to L4 is inferred from its list of topics),
and the inputs of sequential monitoring that a reader needs to compute it again (after the checklist in
Trials 2025, s13063-025-08799-6).

Fill says who can fill an item: A the tool from the store, H a person, AH the tool the facts and a person the
reasons. The tool never writes what a person must.
"""

from __future__ import annotations

from typing import NamedTuple


class Item(NamedTuple):
    """One reporting item."""

    item: str
    topic: str
    asks: str
    living: str
    fill: str


PRISMA = "PRISMA 2020 with the additions for living reviews"
MONITORING = "Inputs of sequential monitoring"

PRISMA_ITEMS = (
    Item("1", "Title", "says that it is a systematic review", "says living; version number", "A"),
    Item(
        "2",
        "Abstract",
        "the twelve points of the abstract",
        "says if this version is the last living one",
        "AH",
    ),
    Item("3", "Rationale", "why, given what is known", "why living; cites the version before", "AH"),
    Item("4", "Objectives", "the questions", "changes since the last version, with reason", "AH"),
    Item(
        "L1", "Living parameters", "", "search schedule per source, schedule of steps, retirement rule", "A"
    ),
    Item("5", "Eligibility", "criteria and grouping for synthesis", "", "A"),
    Item("6", "Sources", "all sources with the last search date of each", "", "A"),
    Item("7", "Strategies", "full strategies with filters and limits", "", "A"),
    Item("8", "Selection", "how many people, independence, automation", "", "A"),
    Item(
        "9",
        "Data collection",
        "how many people, independence, contact with authors",
        "how data of an included trial are updated",
        "A",
    ),
    Item("10a", "Outcomes", "outcomes sought; rule for choosing among results", "", "A"),
    Item("10b", "Other variables", "variables, funding; assumptions on missing data", "", "A"),
    Item(
        "11",
        "Risk-of-bias methods",
        "tool, how many people, independence",
        "how the judgement of an included trial is updated",
        "A",
    ),
    Item("12", "Effect measures", "measure for each outcome", "", "A"),
    Item("13a", "Eligible for synthesis", "how trials were assigned to each synthesis", "", "A"),
    Item("13b", "Preparation", "conversions, missing summary statistics", "", "A"),
    Item("13c", "Display", "how results are tabulated or shown", "", "A"),
    Item(
        "13d", "Synthesis", "model, heterogeneity method, software, reason", "methods of repeated looks", "AH"
    ),
    Item("13e", "Heterogeneity", "ways to explore its causes", "", "A"),
    Item("13f", "Sensitivity", "analyses of robustness", "", "A"),
    Item("14", "Reporting bias method", "how missing results are judged", "", "AH"),
    Item("15", "Certainty method", "how certainty is judged", "", "AH"),
    Item("L2", "Changes to methods", "", "what changed in the methods since the last version, and why", "AH"),
    Item(
        "16a", "Flow", "numbers from hits to trials", "what triggered this version; flow across versions", "A"
    ),
    Item("16b", "Near misses", "excluded look-alikes with reasons", "", "A"),
    Item("17", "Characteristics", "each included trial, cited and described", "", "A"),
    Item("18", "Risk-of-bias results", "judgements per trial", "", "A"),
    Item("19", "Trial results", "per outcome: group data and effect with precision", "", "A"),
    Item("20a", "Synthesis context", "characteristics and risk of bias of the contributors", "", "A"),
    Item("20b", "Synthesis results", "estimate, precision, heterogeneity, direction", "", "A"),
    Item("20c", "Heterogeneity results", "results of the explorations", "", "A"),
    Item("20d", "Sensitivity results", "results of the variants", "", "A"),
    Item("21", "Reporting bias results", "judgement for each synthesis", "", "AH"),
    Item("22", "Certainty results", "rating for each outcome", "", "AH"),
    Item("L3", "Changes to results", "", "what changed in the results since the last version", "A"),
    Item("23a", "Interpretation", "in the light of other evidence", "", "H"),
    Item("23b", "Limits of the evidence", "limits of the included evidence", "", "AH"),
    Item(
        "23c", "Limits of the process", "limits of the review process", "limits due to the living mode", "AH"
    ),
    Item("23d", "Implications", "practice, policy, research", "", "AH"),
    Item("24a", "Registration", "register and number, or not registered", "", "A"),
    Item("24b", "Protocol", "where it is, or none", "", "A"),
    Item("24c", "Amendments", "what differed from register or protocol", "", "A"),
    Item("L4", "Authors and roles", "", "authors of this version, changes in who did what", "A"),
    Item("25", "Support", "money and the role of the funders", "changes since the last version", "AH"),
    Item("26", "Competing interests", "of the authors", "changes since the last version", "AH"),
    Item("27", "Availability", "forms, data, code, materials", "for this version and earlier ones", "A"),
)

MONITORING_ITEMS = (
    Item("M1", "Error rates", "alpha with sides, power, sharing between outcomes", "", "A"),
    Item(
        "M2",
        "Effect to detect",
        "value, reason, whether it is the threshold of the certainty rating",
        "",
        "AH",
    ),
    Item("M3", "Comparator risk or variance", "value and origin, observed value beside it", "", "A"),
    Item("M4", "Heterogeneity", "fixed allowance and re-estimated diversity, both required sizes", "", "A"),
    Item("M5", "Fractions", "table of looks with dates", "", "A"),
    Item("M6", "Spending", "function, convention, spent and left, futility rule", "", "A"),
    Item("M7", "Z curve", "model, tau2 estimator, zero cells, data to download", "", "A"),
    Item("M8", "History", "looks as they happened and the redrawn curve, labelled", "", "A"),
    Item("M9", "Caution", "the fixed sentence beside each result", "", "A"),
)
