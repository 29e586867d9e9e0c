"""Is a subgroup claim credible? The questions to be answered by people, stored as a judgement.

The questions are put in our own words; the matters they raise are those of the literature on subgroup claims
(Oxman and Guyatt 1992, Ann Intern Med 116:78; Sun et al. 2010, BMJ 340:c117; Schandelmaier et al. 2020, CMAJ
192:E901; cited from memory). Nothing is scored: an overall judgement is stored only when a person gives one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum

from treering.errors import AnalysisError


class SubgroupAnswer(StrEnum):
    """Answer of a person to one question."""

    YES = "yes"
    PROBABLY_YES = "probably yes"
    PROBABLY_NO = "probably no"
    NO = "no"
    CANNOT_TELL = "cannot tell"


SUBGROUP_QUESTIONS: Mapping[str, str] = {
    "planned": "Was this comparison of subgroups written down before the results were known?",
    "direction": "Was it written down beforehand which subgroup would benefit more, and did it?",
    "few": "Was it one of only a few subgroup comparisons made?",
    "chance": "Is the interaction test hard to explain by chance alone?",
    "within": "Does the difference arise within trials, rather than only between different trials?",
    "consistent": "Does the difference recur from trial to trial and for related outcomes?",
    "mechanism": "Is there evidence from outside these trials of why the effect should differ?",
    "cutpoint": "If a continuous trait was divided, was the dividing point fixed beforehand?",
    "independent": "Does the difference remain once traits that go with this one are accounted for?",
}


@dataclass(frozen=True, slots=True)
class SubgroupCredibility:
    """A person's judgement of one subgroup claim.

    Attributes
    ----------
    claim : str
        The claim in a sentence.
    judged_by : str
        Initials of the person.
    judged_on : str
        Date, ISO 8601.
    answers : mapping of str to SubgroupAnswer
        One answer for each key of ``SUBGROUP_QUESTIONS``.
    reasons : mapping of str to str
        Reasons in words, for any of the questions.
    overall : str or None
        Overall judgement in the person's words; never computed.
    """

    claim: str
    judged_by: str
    judged_on: str
    answers: Mapping[str, SubgroupAnswer]
    reasons: Mapping[str, str]
    overall: str | None = None

    def __post_init__(self) -> None:
        for field in ("claim", "judged_by", "judged_on"):
            if not getattr(self, field).strip():
                raise AnalysisError(f"The judgement of a subgroup claim needs {field}.")
        missing = [key for key in SUBGROUP_QUESTIONS if key not in self.answers]
        unknown = [key for key in (*self.answers, *self.reasons) if key not in SUBGROUP_QUESTIONS]
        if missing or unknown:
            raise AnalysisError(
                "The answers do not match the questions.",
                found=f"missing {missing}, unknown {unknown}",
                expected=", ".join(SUBGROUP_QUESTIONS),
            )
        known = set(SubgroupAnswer)
        bad = {key: value for key, value in self.answers.items() if value not in known}
        if bad:
            raise AnalysisError(
                "An answer is none of the known ones.",
                found=bad,
                expected=", ".join(SubgroupAnswer),
            )
