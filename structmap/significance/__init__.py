"""How sure: chances of an accident, stability, membership, and the verdict."""

from structmap.significance.cautions import (
    cutoffs_to_vary,
    describe_error_scale,
    list_cautions,
)
from structmap.significance.judging import (
    Effort,
    Judgement,
    UnitEvidence,
    judge_units,
)
from structmap.significance.verdict import choose_verdict

__all__ = [
    "Effort",
    "Judgement",
    "UnitEvidence",
    "choose_verdict",
    "cutoffs_to_vary",
    "describe_error_scale",
    "judge_units",
    "list_cautions",
]
