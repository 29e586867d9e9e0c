"""The vocabulary that code, columns, report and commands share.

One name for one thing. The strings are what stands in files and reports; the terms are those of the
trade (methods by their authors' names, roles and judgements as the handbooks call them).
"""

from __future__ import annotations

from enum import StrEnum


class Measure(StrEnum):
    """How one trial's effect is expressed; ratios are analysed on the log scale."""

    RISK_RATIO = "risk-ratio"
    ODDS_RATIO = "odds-ratio"
    RISK_DIFFERENCE = "risk-difference"
    PETO_ODDS_RATIO = "peto-odds-ratio"
    ARCSINE_DIFFERENCE = "arcsine-difference"
    MEAN_DIFFERENCE = "mean-difference"
    STANDARDIZED_MEAN_DIFFERENCE = "standardized-mean-difference"
    RATIO_OF_MEANS = "ratio-of-means"
    RATE_RATIO = "rate-ratio"
    HAZARD_RATIO = "hazard-ratio"
    GENERIC = "generic"


RATIO_MEASURES = frozenset(
    {
        Measure.RISK_RATIO,
        Measure.ODDS_RATIO,
        Measure.PETO_ODDS_RATIO,
        Measure.RATIO_OF_MEANS,
        Measure.RATE_RATIO,
        Measure.HAZARD_RATIO,
    }
)


class Correction(StrEnum):
    """What is done with a trial that has a zero cell."""

    NONE = "none"
    CONSTANT = "constant"
    TREATMENT_ARM = "treatment-arm"


class PoolingModel(StrEnum):
    """Model of the pooled effect."""

    COMMON = "common"
    RANDOM = "random"


class Tau2(StrEnum):
    """Estimator of the between-trial variance."""

    DERSIMONIAN_LAIRD = "dersimonian-laird"
    PAULE_MANDEL = "paule-mandel"
    REML = "reml"
    ML = "ml"
    HEDGES = "hedges"
    SIDIK_JONKMAN = "sidik-jonkman"
    HUNTER_SCHMIDT = "hunter-schmidt"


class IntervalMethod(StrEnum):
    """Interval and test of the pooled effect."""

    WALD = "wald"
    KNAPP_HARTUNG = "knapp-hartung"
    MODIFIED_KNAPP_HARTUNG = "modified-knapp-hartung"


class PredictionDf(StrEnum):
    """Degrees of freedom of the prediction interval, k being the number of trials."""

    K_MINUS_2 = "k-2"
    K_MINUS_1 = "k-1"


class Spending(StrEnum):
    """Alpha-spending function."""

    OBRIEN_FLEMING = "obrien-fleming"
    POCOCK = "pocock"
    POWER_FAMILY = "power-family"
    HWANG_SHIH_DECANI = "hwang-shih-decani"


class Verdict(StrEnum):
    """The state of one monitored synthesis; no other words are used."""

    ACCRUING = "accruing"
    BENEFIT_CROSSED = "benefit boundary crossed"
    HARM_CROSSED = "harm boundary crossed"
    FUTILITY_CROSSED = "futility boundary crossed"
    REACHED_WITHOUT_CROSSING = "required information reached without a crossing"
    NO_LONGER_SUPPORTED = "crossing no longer supported"
    CANNOT_BE_JUDGED = "cannot be judged at this look"


CROSSED = frozenset({Verdict.BENEFIT_CROSSED, Verdict.HARM_CROSSED, Verdict.FUTILITY_CROSSED})


class OutcomeRole(StrEnum):
    """Whether an outcome is watched for benefit or for harm."""

    BENEFIT = "benefit"
    HARM = "harm"


class Better(StrEnum):
    """Which direction of the outcome is good for patients."""

    LOWER = "lower"
    HIGHER = "higher"


class Judgement(StrEnum):
    """Risk-of-bias judgement of one result (RoB 2 wording)."""

    LOW = "Low"
    SOME_CONCERNS = "Some concerns"
    HIGH = "High"


class Cause(StrEnum):
    """Why a number differs between two versions."""

    NEW_TRIAL = "new trial"
    NEW_REPORT = "new report of an included trial"
    CORRECTION = "correction"
    RETRACTION = "retraction"
    INTEGRITY_NOTICE = "integrity notice"
    RISK_OF_BIAS = "risk-of-bias judgement"
    CERTAINTY = "certainty judgement"
    PROTOCOL = "protocol amendment"
    SOFTWARE = "software change"


class PersonRole(StrEnum):
    """What a person may do in the review."""

    EXTRACTOR = "extractor"
    ADJUDICATOR = "adjudicator"
    ROB_ASSESSOR = "risk-of-bias assessor"
    CERTAINTY_RATER = "certainty rater"
    STATISTICIAN = "statistician"
    REVIEW_LEAD = "review lead"
    INFORMATION_SPECIALIST = "information specialist"
    INTEGRITY_CONTACT = "integrity contact"


class EntryKind(StrEnum):
    """What one entry of the evidence store records."""

    RECEIPT = "receipt"
    STUDY = "study"
    REPORT = "report"
    ARM = "arm"
    OUTCOME = "outcome definition"
    EXTRACTION = "extraction"
    ADJUDICATION = "adjudication"
    VERIFICATION = "verification"
    RESULT = "result"
    WAIVER = "waiver"
    RISK_OF_BIAS = "risk-of-bias judgement"
    CERTAINTY = "certainty judgement"
    INTEGRITY = "integrity notice"
    SEARCH = "search run"
    SCREENING = "screening decision"
    ONGOING = "ongoing trial"
    PROTOCOL = "protocol"
    AMENDMENT = "amendment"
    LOOK = "look"
    ANALYSIS = "analysis"
    VERSION = "version"
    RELEASE = "release"
    RUN = "run"
    NOTICE = "notice"
    DELIVERY = "delivery"
    ACKNOWLEDGEMENT = "acknowledgement"
    PANEL_DECISION = "panel decision"
    WITHDRAWAL = "withdrawal"
    DEFECT = "defect"
    SIMULATION = "simulation"


class NoticeKind(StrEnum):
    """Published notice about a trial's report."""

    ERRATUM = "erratum"
    EXPRESSION_OF_CONCERN = "expression of concern"
    RETRACTION = "retraction"
    REINSTATEMENT = "reinstatement"


class EventClass(StrEnum):
    """Why panel members are told something."""

    CROSSING = "boundary crossed"
    CROSSING_LOST = "crossing no longer supported"
    INTEGRITY = "integrity notice"
    CERTAINTY_STALE = "certainty rating is stale"
    DEFECT = "defect notice"


class CoverageState(StrEnum):
    """How far one version fills one reporting item; nothing is ever filled with invented text."""

    FILLED = "filled"
    PARTLY = "partly"
    MISSING = "missing"
    STALE = "stale"
    NOT_APPLICABLE = "not applicable"


#: Stands beside every monitoring result (Cochrane expert panel 2018; Cochrane Handbook chapter 22).
CAUTION = (
    "A Cochrane expert panel (2018) and chapter 22 of the Cochrane Handbook advise against sequential "
    "methods for main conclusions in most circumstances. A crossing is an alarm that asks the panel to "
    "meet; it is not a conclusion."
)
