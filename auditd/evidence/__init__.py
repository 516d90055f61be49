"""How many independent runs a campaign is worth, and comparisons whose intervals are honest under the dependence found."""

from auditd.evidence.contrast import contrast
from auditd.evidence.number import effective_number
from auditd.evidence.result import Contrast, EffectiveNumber, EvidenceLoss

__all__ = ["Contrast", "EffectiveNumber", "EvidenceLoss", "contrast", "effective_number"]
