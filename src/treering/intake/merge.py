"""Two readings and what a third person settled, made into one. Pure."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from treering.intake.compare import Difference


def open_fields(differences: Sequence[Difference], adjudication: Mapping[str, Any]) -> tuple[Difference, ...]:
    """Return the differences that an adjudication says nothing about."""
    given = {*adjudication["values"], *adjudication["not_reported"]}
    given |= {f"study.{name}" for name in adjudication["study"]}
    given |= {f"subgroup.{name}" for name in adjudication["subgroup"]}
    given |= {"arms"} if adjudication["arms"] else set()
    unusable = adjudication["not_usable"] is not None
    if unusable or adjudication["values"]:
        given.add("not_usable")
    # A result that the adjudicator finds unusable needs no number.
    return tuple(
        d
        for d in differences
        if d.field not in given and not (unusable and not d.field.startswith(("study.", "subgroup.", "arms")))
    )


def merged(first: Mapping[str, Any], second: Mapping[str, Any], settled: Mapping[str, Any]) -> dict[str, Any]:
    """Make one reading: what is settled, else what the first reader wrote, else the second."""
    values = {**second["values"], **first["values"], **settled.get("values", {})}
    for name in settled.get("not_reported", ()):
        values.pop(name, None)
    places = {**second["locators"], **first["locators"], **settled.get("locators", {})}
    not_usable = first["not_usable"] if first["not_usable"] is not None else second["not_usable"]
    if settled and (settled["not_usable"] is not None or settled["values"]):
        not_usable = settled["not_usable"]
    return {
        "report": first["report"],
        "values": {name: values[name] for name in sorted(values)},
        "locators": {name: places[name] for name in sorted(places) if name in values},
        "origins": _merged_origins(first, second, values),
        "not_usable": not_usable,
        "subgroup": {**first["subgroup"], **settled.get("subgroup", {})},
        "study": _study(settled.get("study", {}), first["study"], second["study"]),
        "document": _filled(first["document"], second["document"]),
        "arms": settled.get("arms") or first["arms"] or second["arms"],
        "correction": _joined(first["correction"], second["correction"]),
    }


def _merged_origins(
    first: Mapping[str, Any], second: Mapping[str, Any], values: Mapping[str, Any]
) -> dict[str, str]:
    """Keep for each number the origin furthest from print that one of the readers named."""
    rank = ("reported", "converted", "from authors", "read off a graph", "imputed")
    origins = {}
    for name in sorted(values):
        named = [body["origins"][name] for body in (first, second) if name in body["origins"]]
        if named:
            origins[name] = max(named, key=rank.index)
    return origins


def _study(settled: Mapping[str, Any], first: Mapping[str, Any], second: Mapping[str, Any]) -> dict[str, Any]:
    """Take each fact from who gives it, and the date from who gives it more precisely."""
    study = _filled(settled, first, second)
    dates = [str(source["published"]) for source in (first, second) if source.get("published")]
    if dates and settled.get("published") is None:
        study["published"] = max(dates, key=len)
    return study


def _filled(*sources: Mapping[str, Any]) -> dict[str, Any]:
    """Take each field from the first source that gives it."""
    names = sorted({name for source in sources for name in source})
    return {
        name: next((source[name] for source in sources if source.get(name) is not None), None)
        for name in names
    }


def _joined(*texts: str | None) -> str | None:
    given = sorted({text for text in texts if text})
    return "; ".join(given) or None
