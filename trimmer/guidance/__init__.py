"""From readings to the next turn. Pure: no input or output, no clock, no hidden random state.

Importing this loads none of the reckoning (a quarter of a second): values such as `advice.Advice` are
needed on the screen before the first turn is thought of.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from trimmer.guidance.guide import BestSeen, Guide
    from trimmer.guidance.memory import KindPrior, Learned
    from trimmer.guidance.warming import WarmDrift, Warming
    from trimmer.guidance.whole_range import RangeSetting, joint_setting

_HOMES = {
    "BestSeen": "guide",
    "Guide": "guide",
    "KindPrior": "memory",
    "Learned": "memory",
    "RangeSetting": "whole_range",
    "WarmDrift": "warming",
    "Warming": "warming",
    "joint_setting": "whole_range",
}

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


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(importlib.import_module(f"{__name__}.{_HOMES[name]}"), name)
