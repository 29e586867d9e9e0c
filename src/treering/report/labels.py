"""Words for field names and small values, so that no page shows a bare key."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.report.numbers import MINUS, number

_FIELDS = {
    "standard_error": "standard error",
    "in_main": "in the main analysis",
    "left_out": "reason left out",
    "risk_of_bias": "risk of bias",
    "ci_low": "lower end",
    "ci_high": "upper end",
}
_ARM = {"sd": "SD", "time": "person-time"}
_SPENDING = {
    "obrien-fleming": "O'Brien-Fleming-type function of Lan and DeMets",
    "pocock": "Pocock-type function of Lan and DeMets",
    "power-family": "power family",
    "hwang-shih-decani": "Hwang, Shih and DeCani",
}


def field_words(name: str) -> str:
    """Return the words of a field: ``values.intervention_events`` is "intervention events"."""
    name = name.removeprefix("values.")
    return _FIELDS.get(name, name.replace("_", " "))


def value_words(value: Any) -> str:
    """Return a stored value as readers write it."""
    if value is None:
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return number(value, 0)
    if isinstance(value, float):
        return number(value, 0) if value.is_integer() else f"{value:.6g}".replace("-", MINUS)
    if isinstance(value, Mapping):
        return "; ".join(f"{field_words(k)}: {value_words(v)}" for k, v in sorted(value.items())) or "none"
    if isinstance(value, list | tuple):
        return "; ".join(value_words(v) for v in value) or "none"
    return str(value)


def spending_words(plan: Mapping[str, Any]) -> str:
    """Name the spending function with its parameter and convention."""
    name = _SPENDING[plan["spending"]]
    parameter = plan.get("spending_parameter")
    with_parameter = name if parameter is None else f"{name}, parameter {number(parameter, 2)}"
    convention = (
        "applied to half of alpha in each tail" if plan["sides"] == 2 else "applied to alpha in one tail"
    )
    return f"{with_parameter}, {convention}"


def side_words(values: Mapping[str, Any], side: str) -> str:
    """Return the numbers of one arm as one text: "18 of 96", "mean 3.2, SD 1.1, 60 people".

    Parameters
    ----------
    values : mapping
        Verified numbers of a trial.
    side : str
        "intervention" or "comparator".

    Returns
    -------
    str
        "not reported" when the trial reports no number of that arm.
    """
    own = {
        name.removeprefix(f"{side}_"): value
        for name, value in _in_order(values)
        if name.startswith(f"{side}_") and value is not None
    }
    if "events" in own and "total" in own:
        parts = [f"{value_words(own.pop('events'))} of {value_words(own.pop('total'))}"]
    else:
        parts = []
    people = [f"{value_words(own.pop('total'))} people"] if "total" in own else []
    parts += [f"{_ARM.get(name, field_words(name))} {value_words(value)}" for name, value in own.items()]
    return ", ".join([*parts, *people]) or "not reported"


def other_words(values: Mapping[str, Any]) -> str:
    """Return the numbers of a trial that belong to no arm, as one text; empty when there are none."""
    return ", ".join(
        f"{field_words(name)} {value_words(value)}"
        for name, value in _in_order(values)
        if not name.startswith(("intervention_", "comparator_")) and value is not None
    )


#: Order of reading; a stored mapping has its fields in the order of the alphabet.
_ORDER = ("events", "mean", "sd", "time", "estimate", "log_estimate", "ci_low", "ci_high", "standard_error")


def _in_order(values: Mapping[str, Any]) -> list[tuple[str, Any]]:
    def place(name: str) -> tuple[int, str]:
        plain = name.removeprefix("intervention_").removeprefix("comparator_")
        return (_ORDER.index(plain) if plain in _ORDER else len(_ORDER), name)

    return sorted(values.items(), key=lambda pair: place(pair[0]))
