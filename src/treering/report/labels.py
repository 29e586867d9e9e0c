"""Words for field names and small values, so that no page shows a bare key."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from treering.report.numbers import number

_FIELDS = {
    "standard_error": "standard error",
    "in_main": "in the main analysis",
    "left_out": "reason left out",
    "risk_of_bias": "risk of bias",
    "ci_low": "lower end",
    "ci_high": "upper end",
}
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
        return number(value, 0 if value.is_integer() else 4)
    if isinstance(value, Mapping):
        return "; ".join(f"{field_words(k)}: {value_words(v)}" for k, v in value.items()) or "none"
    if isinstance(value, list | tuple):
        return "; ".join(value_words(v) for v in value) or "none"
    return str(value)


def spending_words(plan: Mapping[str, Any]) -> str:
    """Name the spending function with its parameter and convention."""
    name = _SPENDING[plan["spending"]]
    parameter = plan.get("spending_parameter")
    with_parameter = name if parameter is None else f"{name}, parameter {number(parameter, 2)}"
    convention = "applied to half of alpha in each tail" if plan["sides"] == 2 else "applied to alpha in one tail"
    return f"{with_parameter}, {convention}"


def raw_columns(measure: str, rows: list[Mapping[str, Any]]) -> list[str]:
    """Return the value fields that any trial has, in the order the effects package reads them."""
    order = [
        f"{side}_{what}"
        for side in ("intervention", "comparator")
        for what in ("events", "mean", "sd", "time", "total")
    ]
    present = {name for row in rows for name, value in (row.get("values") or {}).items() if value is not None}
    return [name for name in order if name in present] + sorted(present - set(order))
