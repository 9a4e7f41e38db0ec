"""The example that teaches dialects is a dialect, and reads the instrument it is about."""

from __future__ import annotations

import re
from fractions import Fraction
from pathlib import Path

import numpy as np

from drivers.visa import dialect_names, open_instrument
from tests.drivers.visa.servers.brain import Brain, block
from tests.drivers.visa.servers.links import SocketServer

PAGE = (Path(__file__).parents[3] / "docs" / "dialects.md").read_text(encoding="utf-8")


class Recorder(Brain):
    """The instrument of the page."""

    def new_frame(self) -> None:
        self.codes = self.draw(10, 240)
        self.interval = Fraction(1, 500_000)
        self.polls = 0
        self.mean(lambda code: (code - 128) * Fraction("0.04") + Fraction("0.5"))

    def own(self, head: str, argument: str) -> bytes | None:
        answers = {
            "REC:SCALE?": "8,0.04,0.0,2.0E-6,AC",
            "REC:BITS?": "8",
            "REC:VPC?": "0.04",
            "REC:MID?": "0.5",
            "REC:STEP?": "2.0E-6",
            "REC:COUPLING?": "AC",
        }
        if head in answers:
            return answers[head].encode()
        match head:
            case "REC:GO":
                self.arm()
            case "REC:STATE?":
                self.polls += 1
                return b"IDLE" if self.polls % 3 == 0 else b"BUSY"
            case "REC:DATA?":
                return block(bytes(self.codes.tolist()))
            case "REC:SOURCE" | "REC:FREE":
                pass
            case _:
                self.fail()
        return None


def test_the_example_reads_its_instrument(tmp_path) -> None:
    example = re.search(r"```toml\n(.*?)```", PAGE, re.DOTALL)
    assert example is not None
    (tmp_path / "dialects").mkdir()
    (tmp_path / "dialects" / "my-recorder.toml").write_text(example[1], encoding="utf-8")
    brain = Recorder()
    with SocketServer(brain) as server:
        for name in ("my-recorder", None):
            with open_instrument(server.resource, dialect=name, settings_dir=tmp_path) as source:
                taken = source.capture()
                assert source.info.dialect == "my-recorder"
                meant = np.array([float(volts) for volts in brain.meant])
                assert np.abs(taken.samples - meant).max() < 1e-9
                assert taken.interval_s == 2e-6
                assert taken.bits == 8
    assert brain.log.count("REC:FREE") == 2


def test_the_page_lists_every_dialect_and_key() -> None:
    from drivers.visa.dialect import Dialect

    for name in dialect_names():
        assert f"| `{name}` |" in PAGE
    for key in Dialect.model_fields:
        assert re.search(rf"`\[?\[?{key}\]?\]?`", PAGE), key
