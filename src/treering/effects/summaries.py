"""Mean and SD of one arm from its median with range, quartiles or both.

SD: Wan, Wang, Liu and Tong 2014, BMC Med Res Methodol 14:135. Mean: the same, or Luo, Wan, Liu and Tong 2018,
Stat Methods Med Res 27:1785. Test of skewness: Shi, Luo, Wan, Liu, Liu, Bian and Tong 2020, Detecting the
skewness of data from the sample size and the five-number summary, arXiv 2010.05749. All of them suppose a
normal distribution behind the figures, hence the test beside each result.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

from scipy.integrate import quad
from scipy.special import log_ndtr, ndtri

from treering.effects.record import NOT_STATED, Conversion, need, need_finite, need_people, record

WAN = "Wan, Wang, Liu and Tong 2014, BMC Med Res Methodol 14:135"
LUO = "Luo, Wan, Liu and Tong 2018, Stat Methods Med Res 27:1785"
SHI = "Shi, Luo, Wan, Liu, Liu, Bian and Tong 2020, arXiv 2010.05749"


@dataclass(frozen=True)
class Skewness:
    """Result of the skewness test at the 5% level.

    Parameters
    ----------
    statistic : float
        Size of the asymmetry, without unit.
    critical : float
        Value that one normal sample in twenty passes.
    skewed : bool
        Whether the statistic lies above it.
    """

    statistic: float
    critical: float
    skewed: bool


@dataclass(frozen=True)
class _Summary:
    total: float
    median: float
    minimum: float | None
    maximum: float | None
    quartile_1: float | None
    quartile_3: float | None

    @property
    def has_range(self) -> bool:
        return self.minimum is not None and self.maximum is not None

    @property
    def has_quartiles(self) -> bool:
        return self.quartile_1 is not None and self.quartile_3 is not None

    @property
    def range(self) -> tuple[float, float]:
        """Width and middle of the range."""
        return _width_and_middle(self.minimum, self.maximum)

    @property
    def quartiles(self) -> tuple[float, float]:
        """Width and middle of the quartiles."""
        return _width_and_middle(self.quartile_1, self.quartile_3)


def _width_and_middle(low: float | None, high: float | None) -> tuple[float, float]:
    if low is None or high is None:  # the callers ask only for what is there
        raise AssertionError("a limit is missing")
    return high - low, (low + high) / 2


def mean_and_sd_from_summary(
    median: float,
    total: float,
    *,
    minimum: float | None = None,
    maximum: float | None = None,
    quartile_1: float | None = None,
    quartile_3: float | None = None,
    mean_method: str = "luo",
    trial: str | None = None,
    origin: str = NOT_STATED,
) -> Conversion:
    """Mean and SD of one arm from its median with the range (S1), both (S2) or the quartiles (S3).

    Parameters
    ----------
    median : float
        Median of the arm.
    total : float
        Participants of the arm; five or more with a range, as the source has it.
    minimum, maximum : float, optional
        Range; both or neither.
    quartile_1, quartile_3 : float, optional
        First and third quartile; both or neither.
    mean_method : str
        "luo" (weights by sample size) or "wan" (fixed weights). The SD is Wan's in both cases.
    trial, origin : str
        For messages, and where the figures stand in the report.

    Returns
    -------
    Conversion
        With results ``mean`` and ``sd`` (unit of the measurement), ``skewness`` and ``skewness_critical``. A
        remark says so where the test finds the data skewed: then these figures should not be relied on.

    Raises
    ------
    AnalysisError
        If figures are missing, not in rising order, or leave no spread.
    """
    summary = _Summary(total, median, minimum, maximum, quartile_1, quartile_3)
    _check(summary, trial)
    known = mean_method in ("luo", "wan")
    need(known, "mean_method", mean_method, "is unknown", "luo or wan", trial)
    skew = _skewness(summary)
    mean = _luo_mean(summary) if mean_method == "luo" else _wan_mean(summary)
    result = {
        "mean": mean,
        "sd": _wan_sd(summary),
        "skewness": skew.statistic,
        "skewness_critical": skew.critical,
    }
    scenario = _scenario(summary)
    sources = f"mean: {LUO if mean_method == 'luo' else WAN}; SD: {WAN}; skewness: {SHI}"
    remarks = (f"Skewed at the 5% level ({SHI}): a mean and SD do not describe these data well.",)
    name = f"mean-{mean_method}-sd-wan-{scenario}"
    return record(
        name, sources, _inputs(summary), result, origin, remarks if skew.skewed else (), trial=trial
    )


def skewness_check(
    median: float,
    total: float,
    *,
    minimum: float | None = None,
    maximum: float | None = None,
    quartile_1: float | None = None,
    quartile_3: float | None = None,
    trial: str | None = None,
) -> Skewness:
    """Test whether a five-number summary, or part of it, is too skewed for a normal distribution.

    With a the minimum, q1, m, q3 the quartiles and b the maximum, T1 = |a + b - 2m|/(b - a) is compared with
    1.01/ln(n + 9) + 2.43/(n + 1), T2 = |q1 + q3 - 2m|/(q3 - q1) with 2.66/sqrt(n) - 5.92/n^2, and with both
    at hand max(2.65 ln(0.6n)/sqrt(n) T1, T2) with 2.97/sqrt(n) - 39.1/n^3 (Shi et al. 2020; constants from
    memory, confirmed by our own simulation of normal samples).

    Parameters
    ----------
    median, total, minimum, maximum, quartile_1, quartile_3, trial : float or str
        As for :func:`mean_and_sd_from_summary`.

    Returns
    -------
    Skewness
        Statistic, critical value at 5% and whether it is passed.

    Raises
    ------
    AnalysisError
        If figures are missing, not in rising order, or leave no spread.
    """
    summary = _Summary(total, median, minimum, maximum, quartile_1, quartile_3)
    _check(summary, trial)
    return _skewness(summary)


def expected_range(total: int) -> float:
    r"""Compute the expected range of a standard normal sample.

    :math:`\xi(n) = \int \{1 - \Phi(x)^n - (1-\Phi(x))^n\}\,dx` (Tippett 1925, Biometrika 17:364; tabulated
    by Wan et al. 2014, table 1).

    Parameters
    ----------
    total : int
        Sample size, two or more.

    Returns
    -------
    float
        Expected range in SDs.

    Raises
    ------
    AnalysisError
        If the sample is smaller than two.
    """
    need_people(total=total)

    def missed(x: float) -> float:
        return float(-math.expm1(total * log_ndtr(x)) - math.exp(total * log_ndtr(-x)))

    half, _ = quad(missed, 0, 40, points=[2, 5, 10], epsabs=1e-13, epsrel=1e-12, limit=200)
    return 2 * half


def _scenario(summary: _Summary) -> str:
    if summary.has_range and summary.has_quartiles:
        return "S2"
    return "S1" if summary.has_range else "S3"


def _inputs(summary: _Summary) -> dict[str, float | str]:
    fields = {
        "minimum": summary.minimum,
        "quartile_1": summary.quartile_1,
        "median": summary.median,
        "quartile_3": summary.quartile_3,
        "maximum": summary.maximum,
        "total": summary.total,
    }
    return {name: value for name, value in fields.items() if value is not None}


def _check(summary: _Summary, trial: str | None) -> None:
    need_people(trial, total=summary.total)
    pairs = (("minimum", "maximum"), ("quartile_1", "quartile_3"))
    for low, high in pairs:
        whole = (getattr(summary, low) is None) == (getattr(summary, high) is None)
        need(whole, f"{low}, {high}", "one of two", "one without the other", "both or neither", trial)
    any_pair = summary.has_range or summary.has_quartiles
    need(
        any_pair,
        "minimum, quartile_1",
        "neither",
        "a range or quartiles are needed",
        "range or quartiles",
        trial,
    )
    need_finite(trial, median=summary.median)
    read = {name: value for name, value in vars(summary).items() if value is not None and name != "total"}
    need_finite(trial, **read)
    given = {name: float(value) for name, value in _inputs(summary).items() if name != "total"}
    values = list(given.values())
    names = list(given)
    for before, name in itertools.pairwise(names):
        need(
            given[before] <= given[name],
            name,
            given[name],
            f"is below {before}",
            "figures in rising order",
            trial,
        )
    need(
        values[-1] > values[0], "median", values, "the figures leave no spread", "a spread above zero", trial
    )
    if summary.has_quartiles:
        need(
            summary.quartiles[0] > 0,
            "quartile_1, quartile_3",
            values,
            "are equal",
            "a spread above zero",
            trial,
        )
    # Below this size the printed corrections turn the denominators or critical values negative.
    need(summary.total >= 5, "total", summary.total, "is too small for these formulas", "5 or more", trial)


def _wan_sd(summary: _Summary) -> float:
    """Equations 9 (S1), 13 (S2) and 16 (S3) of Wan et al. 2014."""
    n, parts = summary.total, []
    if summary.has_range:
        parts.append(summary.range[0] / (2 * ndtri((n - 0.375) / (n + 0.25))))
    if summary.has_quartiles:
        parts.append(summary.quartiles[0] / (2 * ndtri((0.75 * n - 0.125) / (n + 0.25))))
    return float(sum(parts) / len(parts))


def _wan_mean(summary: _Summary) -> float:
    """Return (a + 2m + b)/4, (a + 2 q1 + 2m + 2 q3 + b)/8 and (q1 + m + q3)/3."""
    m = summary.median
    if summary.has_range and summary.has_quartiles:
        return (summary.range[1] + 2 * summary.quartiles[1] + m) / 4
    return (summary.range[1] + m) / 2 if summary.has_range else (2 * summary.quartiles[1] + m) / 3


def _luo_mean(summary: _Summary) -> float:
    """Equations 7, 15 and 11 of Luo et al. 2018 (numbers from memory)."""
    n, m = float(summary.total), summary.median
    if summary.has_range and summary.has_quartiles:
        outer, inner = 2.2 / (2.2 + math.pow(n, 0.75)), 0.7 - 0.72 / math.pow(n, 0.55)
        return outer * summary.range[1] + inner * summary.quartiles[1] + (1 - outer - inner) * m
    if summary.has_range:
        weight = 4 / (4 + math.pow(n, 0.75))
        return weight * summary.range[1] + (1 - weight) * m
    weight = 0.7 + 0.39 / n
    return weight * summary.quartiles[1] + (1 - weight) * m


def _skewness(summary: _Summary) -> Skewness:
    n, m = summary.total, summary.median
    statistics = []
    if summary.has_range:
        width, middle = summary.range
        statistics.append(2 * abs(middle - m) / width)
        critical = 1.01 / math.log(n + 9) + 2.43 / (n + 1)
    if summary.has_quartiles:
        width, middle = summary.quartiles
        statistics.append(2 * abs(middle - m) / width)
        critical = 2.66 / math.sqrt(n) - 5.92 / n**2
    if len(statistics) == 2:
        statistics[0] *= 2.65 * math.log(0.6 * n) / math.sqrt(n)
        critical = 2.97 / math.sqrt(n) - 39.1 / n**3
    return Skewness(max(statistics), critical, max(statistics) > critical)
