"""Reading a table of trials."""

from __future__ import annotations

from io import StringIO
from pathlib import Path
from typing import TYPE_CHECKING

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
