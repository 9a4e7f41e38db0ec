"""From readings to the next turn. Pure: no input or output, no clock, no hidden random state."""

from trimmer.guidance.guide import BestSeen, Guide
from trimmer.guidance.memory import KindPrior, Learned
from trimmer.guidance.warming import WarmDrift, Warming
from trimmer.guidance.whole_range import RangeSetting, joint_setting

__all__ = [
    "BestSeen",
    "Guide",
    "KindPrior",
    "Learned",
    "RangeSetting",
    "WarmDrift",
    "Warming",
    "joint_setting",
]
