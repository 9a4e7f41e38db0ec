"""The real command on an instrument that is not ours and knows hardly more than its dialect."""

from __future__ import annotations

from typing import Any

import pytest

from tests.command import Running
from tests.session.foreign import BareInstrument
from tests.session.sources import StraightUnit
from tests.session.test_session import SIGN

VARIETIES: dict[str, dict[str, Any]] = {
    "error queue": {},
    "no error queue": {"has_queue": False},
    "text, formats ignored in silence": {"has_queue": False, "says_text": True},
    "single sequence only": {"arms_by": ":SINGLE"},
    "single sequence only, no error queue": {"arms_by": ":SINGLE", "has_queue": False},
    "a tenth of a second over each answer": {"slow_s": 0.1, "says_text": True},
}


@pytest.mark.parametrize("variety", VARIETIES)
def test_a_bare_instrument_in_another_process_is_trimmed(variety: str) -> None:
    unit = StraightUnit(41)
    with (
        BareInstrument(unit, **VARIETIES[variety]) as instrument,
        Running("tune", instrument.resource, "--json") as tune,
    ):
        for event in tune.events():
            last = event
            if event["event"] == "advice":
                unit.turn(event["trim"], SIGN[event["sense"]] * event["turns"])
                tune.say("moved")
        assert tune.end() == 0, tune.messages
    assert last["verdict"] == "at-floor"
    assert unit.thd() <= 0.0042
    assert instrument.frames > 4
