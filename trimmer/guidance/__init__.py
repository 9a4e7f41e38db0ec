"""From readings to the next turn. Pure: no input or output, no clock, no hidden random state."""

from trimmer.guidance.guide import BestSeen, Guide
from trimmer.guidance.memory import KindPrior, Learned

__all__ = ["BestSeen", "Guide", "KindPrior", "Learned"]
