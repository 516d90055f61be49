"""How many independent runs a campaign is worth, and comparisons with honest intervals."""

from auditd.evidence.contrast import contrast
from auditd.evidence.loss import evidence_loss
from auditd.evidence.number import effective_number
from auditd.evidence.result import Contrast, EffectiveNumber, EvidenceLoss
from auditd.evidence.verdict import runs_needed, verdict

__all__ = [
    "Contrast",
    "EffectiveNumber",
    "EvidenceLoss",
    "contrast",
    "effective_number",
    "evidence_loss",
    "runs_needed",
    "verdict",
]
