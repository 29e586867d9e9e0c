"""Prior distributions of the between-trial standard deviation tau.

Three weakly informative families (half-normal and half-Cauchy: Gelman 2006, Bayesian Anal 1:515) and
published empirical distributions: what tau was in thousands of earlier meta-analyses of the same kind of
outcome. Those are printed for tau squared on the log scale; since log(tau) = log(tau squared) / 2, location
and spread are halved here.

Every published value below was written from memory and is marked so in ``from_memory``: check it
against the paper before a protocol names it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from scipy.stats import cauchy, norm
from scipy.stats import t as student

from treering.errors import AnalysisError
from treering.pooling.quadrature import Array


class TauPrior(Protocol):
    """A proper distribution on tau > 0."""

    @property
    def tail_power(self) -> float:
        """Power a of the tail tau^-a of the density; infinite when lighter than any power."""
        ...

    def log_density(self, tau: Array) -> Array:
        """Log density at ``tau``, same shape."""
        ...

    def quantile(self, probability: Array) -> Array:
        """Quantiles of tau."""
        ...

    def describe(self) -> str:
        """Name the distribution with its parameters, in words."""
        ...


def _positive(value: float, name: str) -> None:
    if not (math.isfinite(value) and value > 0):
        raise AnalysisError(f"The prior's {name} must be above 0.", found=value)


@dataclass(frozen=True, slots=True)
class HalfNormal:
    """Absolute value of a normal variable with mean 0 and standard deviation ``scale``."""

    scale: float
    tail_power: float = math.inf

    def __post_init__(self) -> None:
        _positive(self.scale, "scale")

    def log_density(self, tau: Array) -> Array:
        """Log density at ``tau``."""
        return np.asarray(norm.logpdf(tau, scale=self.scale) + math.log(2))

    def quantile(self, probability: Array) -> Array:
        """Quantiles of tau."""
        return np.asarray(norm.ppf(0.5 + np.asarray(probability) / 2, scale=self.scale))

    def describe(self) -> str:
        """Name the distribution."""
        return f"half-normal, scale {self.scale:g}"


@dataclass(frozen=True, slots=True)
class HalfCauchy:
    """Absolute value of a Cauchy variable with centre 0 and scale ``scale``."""

    scale: float
    tail_power: float = 2.0

    def __post_init__(self) -> None:
        _positive(self.scale, "scale")

    def log_density(self, tau: Array) -> Array:
        """Log density at ``tau``."""
        return np.asarray(cauchy.logpdf(tau, scale=self.scale) + math.log(2))

    def quantile(self, probability: Array) -> Array:
        """Quantiles of tau."""
        return np.asarray(cauchy.ppf(0.5 + np.asarray(probability) / 2, scale=self.scale))

    def describe(self) -> str:
        """Name the distribution."""
        return f"half-Cauchy, scale {self.scale:g}"


@dataclass(frozen=True, slots=True)
class LogNormal:
    """log(tau) normal with mean ``location`` and standard deviation ``spread``."""

    location: float
    spread: float
    tail_power: float = math.inf

    def __post_init__(self) -> None:
        _positive(self.spread, "spread")
        if not math.isfinite(self.location):
            raise AnalysisError("The prior's location must be finite.", found=self.location)

    def log_density(self, tau: Array) -> Array:
        """Log density at ``tau``."""
        return np.asarray(norm.logpdf(np.log(tau), self.location, self.spread) - np.log(tau))

    def quantile(self, probability: Array) -> Array:
        """Quantiles of tau."""
        return np.asarray(np.exp(norm.ppf(probability, self.location, self.spread)))

    def describe(self) -> str:
        """Name the distribution."""
        return f"log-normal, log(tau) with mean {self.location:g} and SD {self.spread:g}"


@dataclass(frozen=True, slots=True)
class LogStudent:
    """log(tau) Student t with ``df`` degrees of freedom, centre ``location``, scale ``spread``."""

    location: float
    spread: float
    df: float
    tail_power: float = 1.0

    def __post_init__(self) -> None:
        _positive(self.spread, "spread")
        _positive(self.df, "degrees of freedom")
        if not math.isfinite(self.location):
            raise AnalysisError("The prior's location must be finite.", found=self.location)

    def log_density(self, tau: Array) -> Array:
        """Log density at ``tau``."""
        return np.asarray(student.logpdf(np.log(tau), self.df, self.location, self.spread) - np.log(tau))

    def quantile(self, probability: Array) -> Array:
        """Quantiles of tau."""
        return np.asarray(np.exp(student.ppf(probability, self.df, self.location, self.spread)))

    def describe(self) -> str:
        """Name the distribution."""
        return f"log-t ({self.df:g} df), log(tau) centred at {self.location:g} with scale {self.spread:g}"


@dataclass(frozen=True, slots=True)
class EmpiricalPrior:
    """A published distribution of tau for one kind of outcome and comparison.

    Attributes
    ----------
    prior : LogNormal or LogStudent
        The distribution of tau.
    outcome, comparison : str
        What the earlier meta-analyses were about.
    scale : str
        Analysis scale it holds for: "log odds ratio" or "standardized mean difference".
    source : str
        Publication.
    printed : str
        The distribution as published, for tau squared.
    from_memory : bool
        True: the value was recalled and not read from the paper.
    """

    prior: LogNormal | LogStudent
    outcome: str
    comparison: str
    scale: str
    source: str
    printed: str
    from_memory: bool = True


_TURNER_2012 = "Turner, Davey, Clarke, Thompson and Higgins 2012, Int J Epidemiol 41:818"
_TURNER_2015 = "Turner, Jackson, Wei, Thompson and Higgins 2015, Stat Med 34:984"
_RHODES_2015 = "Rhodes, Turner and Higgins 2015, J Clin Epidemiol 68:52"


def _binary(location: float, spread: float, outcome: str, comparison: str, source: str) -> EmpiricalPrior:
    """Log-normal for tau squared of log odds ratios."""
    return EmpiricalPrior(
        LogNormal(location / 2, spread / 2),
        outcome,
        comparison,
        "log odds ratio",
        source,
        f"log(tau squared) normal with mean {location:g} and SD {spread:g}",
    )


_MORTALITY, _SEMI, _SUBJECTIVE = "all-cause mortality", "semi-objective", "subjective"
_DRUG_CONTROL, _DRUG_DRUG, _OTHER = (
    "pharmacological against placebo or control",
    "pharmacological against pharmacological",
    "any comparison with a non-pharmacological intervention",
)

# Means and SDs of log(tau squared), every one of them from memory (see ``from_memory``).
EMPIRICAL_PRIORS: Mapping[str, EmpiricalPrior] = {
    "turner-2012-any-outcome": _binary(-2.56, 1.74, "any", "any", _TURNER_2012),
    "turner-2015-mortality-drug-control": _binary(-4.06, 1.45, _MORTALITY, _DRUG_CONTROL, _TURNER_2015),
    "turner-2015-mortality-drug-drug": _binary(-4.27, 1.48, _MORTALITY, _DRUG_DRUG, _TURNER_2015),
    "turner-2015-mortality-non-drug": _binary(-3.93, 1.51, _MORTALITY, _OTHER, _TURNER_2015),
    "turner-2015-semi-objective-drug-control": _binary(-3.02, 1.85, _SEMI, _DRUG_CONTROL, _TURNER_2015),
    "turner-2015-semi-objective-drug-drug": _binary(-3.23, 1.88, _SEMI, _DRUG_DRUG, _TURNER_2015),
    "turner-2015-semi-objective-non-drug": _binary(-2.89, 1.91, _SEMI, _OTHER, _TURNER_2015),
    "turner-2015-subjective-drug-control": _binary(-2.13, 1.58, _SUBJECTIVE, _DRUG_CONTROL, _TURNER_2015),
    "turner-2015-subjective-drug-drug": _binary(-2.34, 1.62, _SUBJECTIVE, _DRUG_DRUG, _TURNER_2015),
    "turner-2015-subjective-non-drug": _binary(-2.01, 1.64, _SUBJECTIVE, _OTHER, _TURNER_2015),
    "rhodes-2015-any-outcome": EmpiricalPrior(
        LogStudent(-3.44 / 2, 2.59 / 2, 5.0),
        "any",
        "any",
        "standardized mean difference",
        _RHODES_2015,
        "log(tau squared) Student t with 5 df, centre -3.44 and scale 2.59",
    ),
}


def read_prior(words: str) -> TauPrior | str:
    """Read a prior of tau written out: a family and its numbers, or the name of a published one.

    Parameters
    ----------
    words : str
        "half-normal SCALE", "half-cauchy SCALE", "log-normal LOCATION SPREAD" (of log tau), or a name in
        ``EMPIRICAL_PRIORS``.

    Returns
    -------
    TauPrior or str
        The distribution; a published one stays a name, so that its source is told with the result.

    Raises
    ------
    AnalysisError
        Unknown words, or numbers that are missing, too many or out of range.
    """
    name, *rest = words.split() or [""]
    if name in EMPIRICAL_PRIORS and not rest:
        return name
    try:
        given = [float(word) for word in rest]
    except ValueError:
        raise AnalysisError(
            "A prior is a name and numbers.", found=words, expected="half-normal 0.5"
        ) from None
    fields = ("location", "spread") if name == "log-normal" else ("scale",)
    if len(given) > len(fields):
        raise AnalysisError(
            f"The prior {name} takes fewer numbers.", found=words, expected=f"{name} {' '.join(fields)}"
        )
    return tau_prior(name, **dict(zip(fields, given, strict=False)))


def tau_prior(
    name: str, *, scale: float | None = None, location: float | None = None, spread: float | None = None
) -> TauPrior:
    """Look up a prior of tau by its name.

    Parameters
    ----------
    name : str
        "half-normal" or "half-cauchy" (with ``scale``), "log-normal" (with ``location`` and ``spread`` of
        log tau), or a name in ``EMPIRICAL_PRIORS``.
    scale, location, spread : float, optional
        Parameters, on the analysis scale.

    Returns
    -------
    TauPrior

    Raises
    ------
    AnalysisError
        Unknown name, or a parameter that is missing, not positive or not asked for.
    """
    given = {k: v for k, v in (("scale", scale), ("location", location), ("spread", spread)) if v is not None}
    families = {"half-normal": {"scale"}, "half-cauchy": {"scale"}, "log-normal": {"location", "spread"}}
    needed = families.get(name, set())
    if name not in families and name not in EMPIRICAL_PRIORS:
        known = ", ".join([*families, *EMPIRICAL_PRIORS])
        raise AnalysisError("Unknown prior of tau.", found=name, expected=known)
    if set(given) != needed:
        raise AnalysisError(
            f"The prior {name} takes other parameters.",
            found=sorted(given) or "none",
            expected=sorted(needed) or "none",
        )
    if name == "half-normal":
        return HalfNormal(given["scale"])
    if name == "half-cauchy":
        return HalfCauchy(given["scale"])
    if name == "log-normal":
        return LogNormal(given["location"], given["spread"])
    return EMPIRICAL_PRIORS[name].prior
