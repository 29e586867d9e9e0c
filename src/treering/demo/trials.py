"""The trials of the demo. EVERYTHING HERE IS INVENTED: names, numbers, dates, reports, registers."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class InventedTrial:
    """One invented trial with what its report says.

    Parameters
    ----------
    id, title, published, setting : str
        Id, title, ISO date of the report, level of the subgroup "setting".
    randomised : int
        People randomised.
    failed : tuple of int
        Failed first attempts: events and total, warmed arm then comparator.
    pain, minutes : tuple of float or None
        Mean, SD, total of the warmed arm, then of the comparator.
    burns : tuple of int or None
        Skin burns, as `failed`.
    overall : str
        Risk of bias of the main result.
    weak_domain : str
        The domain behind a judgement that is not Low.
    """

    id: str
    title: str
    published: str
    setting: str
    randomised: int
    failed: tuple[int, int, int, int]
    pain: tuple[float, float, int, float, float, int] | None = None
    minutes: tuple[float, float, int, float, float, int] | None = None
    burns: tuple[int, int, int, int] | None = None
    overall: str = "Low"
    weak_domain: str = "measurement"


ALDER = InventedTrial(
    "Alder", "Alder trial (invented)", "2024-03-11", "ward", 220, (24, 110, 33, 108),
    pain=(3.1, 2.1, 110, 3.8, 2.2, 108), burns=(0, 110, 0, 108),
)  # fmt: skip
BIRCH = InventedTrial(
    "Birch", "Birch trial (invented)", "2024-06-20", "emergency room", 192, (19, 95, 24, 96),
    minutes=(6.8, 3.9, 95, 8.1, 4.4, 96), overall="Some concerns",
)  # fmt: skip
CEDAR = InventedTrial(
    "Cedar", "Cedar trial (invented)", "2024-11-05", "ward", 280, (30, 140, 41, 138),
    minutes=(5.9, 3.1, 140, 8.4, 4.0, 138), burns=(1, 140, 0, 138),
)  # fmt: skip
DOGWOOD = InventedTrial(
    "Dogwood", "Dogwood trial (invented)", "2025-02-17", "emergency room", 164, (15, 80, 21, 82),
    pain=(4.0, 2.3, 80, 4.3, 2.2, 82), overall="Some concerns", weak_domain="missing_data",
)  # fmt: skip
ELM = InventedTrial(
    "Elm", "Elm trial (invented)", "2025-12-02", "ward", 300, (28, 150, 36, 148),
    pain=(2.9, 2.0, 150, 3.6, 2.1, 148), minutes=(6.2, 3.6, 150, 7.3, 3.9, 148), burns=(0, 150, 1, 148),
)  # fmt: skip
FIR = InventedTrial(
    "Fir", "Fir trial (invented)", "2025-12-15", "emergency room", 242, (22, 120, 31, 121), overall="High",
    weak_domain="randomisation",
)  # fmt: skip
GORSE = InventedTrial(
    "Gorse", "Gorse trial (invented)", "2026-01-22", "ward", 820, (74, 410, 112, 408),
    burns=(2, 410, 1, 408),
)  # fmt: skip
HAZEL = InventedTrial(
    "Hazel", "Hazel trial (invented)", "2026-02-10", "ward", 866, (80, 430, 118, 432),
    pain=(3.0, 2.1, 430, 3.6, 2.2, 432), burns=(1, 430, 1, 432),
)  # fmt: skip

#: The number in the Cedar report that its erratum corrects: failed first attempts without warming.
CEDAR_CORRECTED_FAILURES = 44
