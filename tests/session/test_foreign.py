"""The real command on an instrument that is not ours and knows hardly more than its dialect."""

from __future__ import annotations

import pytest

from tests.command import Running
from tests.session.foreign import BareInstrument
from tests.session.sources import StraightUnit
from tests.session.test_session import SIGN


@pytest.mark.parametrize("has_queue", [True, False], ids=["error queue", "no error queue"])
def test_a_bare_instrument_in_another_process_is_trimmed(has_queue: bool) -> None:
    unit = StraightUnit(41)
    with (
        BareInstrument(unit, has_queue=has_queue) as instrument,
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
