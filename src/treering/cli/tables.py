"""Reading a table of trials, and a pooled table as lines for people."""

from __future__ import annotations

import math
from collections.abc import Iterator
from io import StringIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from treering.errors import IntakeError

if TYPE_CHECKING:
    import pandas as pd


def read_table(file: Path) -> pd.DataFrame:
    """Read a CSV with one row per trial; a column "trial" names the rows.

    Raises
    ------
    IntakeError
        When the file can't be read as a table.
    """
    import pandas as pd

    try:
        text = file.read_text(encoding="utf-8-sig")
        table = pd.read_csv(StringIO(text))
        if "trial" in table.columns:
            # A trial may be called "NA" or "01": a name is text, never a missing value or a number.
            names = pd.read_csv(StringIO(text), usecols=["trial"], dtype=str, keep_default_na=False)
            table = table.assign(trial=names["trial"]).set_index("trial", drop=False)
    except OSError as error:
        raise IntakeError(f"the table can't be read: {error.strerror}.", file=str(file)) from error
    except ValueError as error:
        raise IntakeError(f"the table can't be read: {error}.", file=str(file)) from error
    if table.empty:
        raise IntakeError("the table holds no trial.", file=str(file), expected="one row per trial")
    return table


def pooled_lines(result: dict[str, Any]) -> Iterator[str]:
    """Yield the main results of a pooled table."""
    ratio = result["scale"] == "log"
    yield f"{result['measure']}, {len(result['trials'])} trials; intervals at {result['level']:.0%}"
    for trial in result["trials"]:
        yield f"  {trial['trial']}: {_interval(trial, ratio)}"
    for item in result["left_out"]:
        yield f"  {item['trial']}: left out, {item['reason']}"
    for name in ("random", "common"):
        if result[name] is not None:
            yield f"{name} effect{'s' if name == 'random' else ''}: {_interval(result[name], ratio)}"
    yield from _spread(result["random"], ratio)
    for name, pooled in result["estimators"].items():
        yield f"  {name}: {_interval(pooled, ratio)}; tau2 {_number(pooled['tau2'])}"
    for effect in result["absolute"]:
        yield (
            f"per {effect['per']} at a comparator risk of {effect['comparator_risk']:g}: "
            f"{_number(effect['difference'])} ({_number(effect['difference_low'])} to "
            f"{_number(effect['difference_high'])})"
        )
    for name, reason in result["not_done"].items():
        yield f"not done: {name.replace('_', ' ')}: {reason}"
    for text in result["warnings"]:
        yield f"note: {text}"


def _spread(pooled: dict[str, Any] | None, ratio: bool) -> Iterator[str]:
    if pooled is None:
        return
    yield (
        f"Q {_number(pooled['q'])} on {_number(pooled['q_df'])} df, P {_number(pooled['q_p'])}; "
        f"tau2 {_number(pooled['tau2'])} ({_number(pooled['tau2_low'])} to {_number(pooled['tau2_high'])}); "
        f"I2 {_number(pooled['i2'])}; D2 {_number(pooled['d2'])}"
    )
    if pooled["prediction_low"] is not None:
        ends = [_natural(pooled[name], ratio) for name in ("prediction_low", "prediction_high")]
        yield f"prediction interval: {ends[0]} to {ends[1]}"


def _interval(row: dict[str, Any], ratio: bool) -> str:
    low, high = (_natural(row[name], ratio) for name in ("ci_low", "ci_high"))
    return f"{_natural(row['estimate'], ratio)} ({low} to {high})"


def _natural(value: float | None, ratio: bool) -> str:
    return _number(math.exp(value) if ratio and value is not None else value)


def _number(value: float | None) -> str:
    return "not estimable" if value is None else f"{value:.4g}"
