"""Every input of a monitoring result, printed beside it so that a reader can compute it again."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.protocol import Outcome
from treering.report.labels import spending_words, value_words
from treering.report.numbers import effect, number, percent, small
from treering.report.view import ReportView

Body = Mapping[str, Any]


def monitoring_inputs(view: ReportView, outcome: Outcome | None, body: Body) -> list[tuple[str, str]]:
    """Return the inputs as pairs of name and text: error rates, effect, risk, information, test.

    Parameters
    ----------
    view : ReportView
        The version.
    outcome : Outcome or None
        The outcome in the protocol; None when it was dropped.
    body : mapping
        Analysis body of a monitored outcome.

    Returns
    -------
    list of (str, str)
    """
    block = body["monitoring"]
    plan, look = block["plan"], block.get("look") or {}
    return [
        *_errors(plan, look, block),
        *_effect(outcome, body, plan),
        *_risk(body),
        *_information(outcome, plan, look, (block.get("inputs") or {}).get("information_per_participant")),
        ("Spending function", spending_words(plan)),
        ("Futility", "non-binding bound by beta spending" if plan.get("futility") else "no futility bound"),
        ("Monitored Z", _test_words(body)),
        *_heterogeneity(block),
        ("Amendments", value_words((block.get("inputs") or {}).get("amendments") or "none")),
        ("Data", "looks.csv and trials.csv beside this page"),
    ]


def _heterogeneity(block: Body) -> list[tuple[str, str]]:
    least = block.get("minimum_trials")
    if least is None:
        return []
    return [
        (
            "Fewest trials",
            f"{value_words(least)}: with fewer, the between-trial variance alone keeps power out of reach",
        )
    ]


def rests_on_pairs(body: Body) -> list[tuple[str, str]]:
    """Return what a crossing rests on as pairs of name and text; empty without a crossing.

    Parameters
    ----------
    body : mapping
        Analysis body of a monitored outcome.

    Returns
    -------
    list of (str, str)
    """
    block = body["monitoring"]
    rests = block.get("rests_on")
    if not rests:
        return []
    names = {row["trial"]: row["label"] for row in body["trials"]}
    sets = "; ".join(" with ".join(names.get(t, t) for t in group) for group in rests["sets"])
    lost, null = rests.get("tau2_lost"), rests.get("null_information")
    people = (block.get("inputs") or {}).get("information_per_participant")
    translated = f" (about {number(null / people, 0)} people)" if null is not None and people else ""
    return [
        ("Trials without which it is not crossed", sets or f"no set of up to {rests['searched']} trials"),
        (
            "Between-trial variance at which it is lost",
            f"{'no value' if lost is None else small(lost)} (now {small(rests['tau2'])})",
        ),
        (
            "Smallest further trial with no effect that undoes it",
            "none" if null is None else f"information {number(null)}{translated}",
        ),
    ]


def _errors(plan: Body, look: Body, block: Body) -> list[tuple[str, str]]:
    spent = look.get("alpha_spent")
    left = None if spent is None else max(plan["alpha"] - spent, 0.0)
    shared = block.get("total_alpha")
    pairs = [
        ("Alpha", f"{small(plan['alpha'])}, {'two-sided' if plan['sides'] == 2 else 'one-sided'}"),
        ("Power", percent(plan["power"])),
        ("Alpha spent and left", f"{small(spent)} spent, {small(left)} left" if look else "no look yet"),
    ]
    if shared is not None:
        pairs.append(("Alpha of all monitored outcomes together", small(shared)))
    return pairs


def _effect(outcome: Outcome | None, body: Body, plan: Body) -> list[tuple[str, str]]:
    shown = effect(plan["effect"], body["scale"], body["measure"])
    unit = f" {body['unit']}" if body.get("unit") else ""
    same = "equal to" if abs(plan["effect"] - body["mid"]) < 1e-12 else "not equal to"
    reason = (
        outcome.monitoring.effect_reason if outcome and outcome.monitoring else "no reason in the protocol"
    )
    return [
        ("Effect to detect", f"{shown}{unit}: {reason}"),
        ("Against the smallest difference that matters", f"{same} it"),
    ]


def _risk(body: Body) -> list[tuple[str, str]]:
    planned = body.get("comparator_risk")
    events = [row["values"].get("comparator_events") for row in body["trials"] if row["in_main"]]
    totals = [row["values"].get("comparator_total") for row in body["trials"] if row["in_main"]]
    if any(value is None for value in [*events, *totals]) or not sum(totals):
        return [] if planned is None else [("Comparator risk", f"{percent(planned, 1)} by the protocol")]
    observed = percent(sum(events) / sum(totals), 1)
    text = "not fixed by the protocol" if planned is None else f"{percent(planned, 1)} by the protocol"
    return [("Comparator risk", f"{text}; observed in the trials {observed}")]


def _information(
    outcome: Outcome | None, plan: Body, look: Body, per_person: float | None
) -> list[tuple[str, str]]:
    reason = (
        outcome.monitoring.diversity_reason if outcome and outcome.monitoring else "no reason in the protocol"
    )
    pairs = [("Allowance for heterogeneity, fixed", f"D² {percent(plan['diversity'])}: {reason}")]
    if not look:
        return pairs
    again = look.get("required_reestimated")
    people = f" (about {number(look['required'] / per_person, 0)} people)" if per_person else ""
    pairs += [
        ("Information so far", f"{number(look['information'])} (1/variance of the common-effect estimate)"),
        (
            "Required information",
            f"{number(look['required'])}{people}; share reached {percent(look['fraction'], 1)}",
        ),
        (
            "The same with D² estimated now",
            "not estimable"
            if again is None
            else f"D² {percent(look['diversity_reestimated'])}: required {number(again)}, share "
            f"{percent(look['fraction_reestimated'], 1)} (shown only; spends nothing)",
        ),
    ]
    if look.get("required_inflated") is not None:
        pairs.append(("Required information inflated for futility", number(look["required_inflated"])))
    return pairs


def _test_words(body: Body) -> str:
    method = (body.get("pooled") or {}).get("method") or "not estimable"
    return f"signed normal quantile of the P value of the planned test ({method})"
