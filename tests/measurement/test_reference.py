"""A clean source seen through the same input, and readings as documents."""

from __future__ import annotations

import json
import math
from dataclasses import fields

import numpy as np
import pytest

from tests.measurement.waves import Wave, parts_of
from trimmer.measurement import (
    Reading,
    Reference,
    combine,
    document,
    from_document,
    measure,
)

UNIT = parts_of(k2=0.004, k3=-0.006 + 0.001j)
COUNT = 8000
SIGMA = 5e-4


def through_chain(parts, amplitude=1.0, f=9.37, seed=0, offset=0.0) -> np.ndarray:
    """A wave bent by a weak square and cube, as an input stage would, plus noise."""
    wave = Wave(parts, 2 * math.pi * f / COUNT, phase=0.3, amplitude=amplitude, offset=offset)
    x = wave.samples(COUNT)
    x = x + 0.003 * x * x + 0.004 * x**3
    return x + SIGMA * np.random.default_rng(seed).standard_normal(COUNT)


def reference(**more) -> Reference:
    frames = [measure(through_chain(np.zeros(28), seed=s, **more), 1.0) for s in range(4)]
    return Reference.of(combine(frames), name="bridge")


def test_the_chains_own_parts_are_taken_off_where_the_level_matches():
    bent = measure(through_chain(UNIT, seed=9), 1.0)
    freed = measure(through_chain(UNIT, seed=9), 1.0, reference=reference())
    truth = np.zeros(28)
    truth[: UNIT.size] = UNIT
    assert np.abs(bent.parts - truth).max() > 9e-4
    assert np.abs(freed.parts - truth).max() < 1e-4
    assert freed.thd.low <= np.linalg.norm(truth) <= freed.thd.high
    assert freed.thd.sigma > bent.thd.sigma  # the reference's own uncertainty is in it
    assert not freed.flags


def test_a_reading_at_the_chains_floor_says_so():
    freed = measure(through_chain(np.zeros(28), seed=7), 1.0, reference=reference())
    assert [flag.code for flag in freed.flags] == ["chain-floor"]
    assert freed.thd.low < 2e-5
    assert freed.thd.value < 1e-4


def test_at_another_level_the_reference_is_held_against_the_reading():
    freed = measure(through_chain(UNIT, amplitude=0.5, seed=3), 1.0, reference=reference())
    plain = measure(through_chain(UNIT, amplitude=0.5, seed=3), 1.0)
    assert [flag.code for flag in freed.flags] == ["reference-unmatched"]
    assert np.array_equal(freed.parts, plain.parts)
    assert freed.thd.sigma > 3 * plain.thd.sigma


def test_a_slightly_other_level_is_taken_off_with_doubt():
    freed = measure(through_chain(UNIT, amplitude=0.9, seed=3), 1.0, reference=reference())
    assert not freed.flags
    truth = np.linalg.norm(UNIT)
    assert freed.thd.low <= truth <= freed.thd.high


def test_skew_of_another_frequency_is_not_taken_off():
    other = reference(f=90.0)
    freed = measure(through_chain(UNIT, seed=3), 1.0, reference=other)
    assert [flag.code for flag in freed.flags] == ["reference-unmatched"]
    plain = measure(through_chain(UNIT, seed=3), 1.0)
    assert np.array_equal(freed.skew_parts, plain.skew_parts)
    assert not np.array_equal(freed.crest_parts, plain.crest_parts)


def test_a_reference_of_fewer_orders_serves_those_it_has():
    frames = [measure(through_chain(np.zeros(28), seed=s), 1.0, orders=6) for s in range(2)]
    freed = measure(through_chain(UNIT, seed=4), 1.0, reference=Reference.of(combine(frames)))
    assert freed.orders == 15
    assert np.abs(freed.parts[: UNIT.size] - UNIT).max() < 1e-4


def test_a_reference_survives_storage_to_the_last_bit():
    stored = reference()
    back = Reference.from_document(json.loads(json.dumps(stored.document(), allow_nan=False)))
    assert back.name == "bridge"
    assert np.array_equal(back.parts, stored.parts)
    assert np.array_equal(back.covariance, stored.covariance)
    assert (back.amplitude, back.fundamental_hz, back.offset) == (
        stored.amplitude, stored.fundamental_hz, stored.offset,
    )  # fmt: skip
    assert back.thd == stored.thd > 1e-3
    for broken in ({}, {**stored.document(), "covariance": [1.0, 2.0]}, {"parts": "x"}):
        with pytest.raises(ValueError, match="not a reference"):
            Reference.from_document(broken)


@pytest.mark.parametrize("with_reference", [False, True])
def test_a_reading_survives_storage_to_the_last_bit(with_reference):
    rng = np.random.default_rng(1)
    samples = through_chain(UNIT) + 0.01 * np.cos(2 * math.pi * 50e-6 * np.arange(COUNT))
    samples = np.round(samples + 0.01 * rng.standard_normal(COUNT), 2)
    reading = measure(
        samples, 1e-5, reference=reference() if with_reference else None, previous_samples=samples
    )
    text = json.dumps(document(reading), allow_nan=False)
    back = from_document(json.loads(text))
    for item in fields(Reading):
        ours, theirs = getattr(reading, item.name), getattr(back, item.name)
        if isinstance(ours, np.ndarray):
            assert np.array_equal(ours, theirs)
            assert not theirs.flags.writeable
        else:
            assert ours == theirs, item.name
    assert reading.flags


def test_a_document_of_a_later_or_an_older_version_is_read_as_far_as_it_is_known():
    plain = document(measure(through_chain(UNIT), 1.0))
    older = {
        k: v for k, v in plain.items() if k not in ("systematic", "freedom", "extra", "noise_power")
    }
    back = from_document({**older, "invented_later": 1})
    assert back.systematic.size == 0
    assert math.isinf(back.freedom)
    for broken in ({}, {**plain, "covariance": [0.0, 1.0]}, {**plain, "thd": 3}):
        with pytest.raises(ValueError, match="not a reading"):
            from_document(broken)


def test_the_skew_of_a_reference_is_doubted_as_its_frequency_is_off():
    near, off = reference(f=9.37), reference(f=14.1)
    at_hand, apart = (measure(through_chain(UNIT, seed=3), 1.0, reference=r) for r in (near, off))
    assert not apart.flags
    leaning = Reference(
        near.fundamental_hz * 1.5, near.amplitude, near.offset, near.parts + 1e-3, near.covariance
    )
    level = Reference(
        near.fundamental_hz, near.amplitude, near.offset, near.parts + 1e-3, near.covariance
    )
    doubtful, sure = (
        measure(through_chain(UNIT, seed=3), 1.0, reference=r) for r in (leaning, level)
    )
    ratio = np.sqrt(np.diag(doubtful.covariance) / np.diag(sure.covariance))
    assert ratio[1] > 3.0  # skew: the logarithm of 1.5 times 1e-3
    assert ratio[0] == pytest.approx(1.0, abs=0.05)
    assert at_hand.thd.sigma <= apart.thd.sigma * 1.05
