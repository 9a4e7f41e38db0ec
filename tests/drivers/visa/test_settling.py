"""Forms told apart by a frame read twice: as codes, and as text in volts."""

from __future__ import annotations

import numpy as np
import pytest

from drivers.visa.frame import values_of
from drivers.visa.settling import agree, settle
from drivers.visa.shelf import shelf

NAMES = ("ten-field", "ten-field-code", "ten-field-signed")
RIVALS = [shelf()[0][name] for name in NAMES]
CODES = np.round(128 + 90 * np.sin(0.1 * np.arange(400))).astype(np.uint8)
FIELDS = {
    "channel": 1.0, "encoding": 0.0, "format": 0.0, "type": 0.0, "points": 400.0, "count": 1.0,
    "x_increment": 1e-6, "x_origin": 0.0, "x_reference": 0.0, "y_increment": 0.008,
    "y_origin": 50.0, "y_reference": 127.0, "mode": None, "sample_rate": None, "depth": None,
}  # fmt: skip
MEANT = {
    "ten-field": (CODES - 127.0) * 0.008 + 50.0,
    "ten-field-code": (CODES - 50.0 - 127.0) * 0.008,
    "ten-field-signed": CODES.astype(np.int8) * 0.008 + 50.0,
}


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("digits", [3, 4, 9])
def test_the_form_that_gives_the_volts_of_the_text_is_taken(name, digits) -> None:
    text = [float(f"{volts:.{digits}E}") for volts in MEANT[name]]
    settled = settle(RIVALS, FIELDS, CODES.tobytes(), text)
    assert settled is not None
    assert settled.dialect.name == name


def test_sign_and_byte_order_are_settled_too() -> None:
    words = (CODES.astype(np.int64) - 128) * 256
    fields = {**FIELDS, "format": 1.0, "y_increment": 1e-4, "y_origin": 0.25, "y_reference": 0.0}
    text = list(words * 1e-4 + 0.25)
    settled = settle(RIVALS, fields, words.astype(">i2").tobytes(), text)
    assert settled is not None
    read = values_of(settled.dialect.codes, fields, words.astype(">i2").tobytes(), settled.reading)
    assert np.array_equal(read, words)


def test_the_last_part_of_a_frame_is_enough() -> None:
    settled = settle(RIVALS, FIELDS, CODES.tobytes(), list(MEANT["ten-field-code"][-150:]))
    assert settled is not None
    assert settled.dialect.name == "ten-field-code"


def test_marks_for_clipped_samples_do_not_mislead() -> None:
    text = MEANT["ten-field"].copy()
    text[:30] = 9.9e37
    settled = settle(RIVALS, FIELDS, CODES.tobytes(), list(text))
    assert settled is not None
    assert settled.dialect.name == "ten-field"


@pytest.mark.parametrize("text", [[9.9e37] * 400, np.linspace(0.0, 1.0, 400), np.zeros(401)])
def test_text_that_fits_nothing_settles_nothing(text) -> None:
    assert settle(RIVALS, FIELDS, CODES.tobytes(), list(text)) is None


def test_rivals_agree_only_where_they_give_the_same_volts() -> None:
    two = RIVALS[:2]
    assert not agree(two, FIELDS, CODES.tobytes())
    assert agree(two, {**FIELDS, "y_origin": 0.0}, CODES.tobytes())
