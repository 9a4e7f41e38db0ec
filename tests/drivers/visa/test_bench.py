"""The simulated bench as a live speaker of every dialect: range, averages, memory, windows."""

from __future__ import annotations

import numpy as np
import pytest

from drivers.bench import DIALECTS, Bench
from drivers.contract import CaptureRequest
from drivers.visa import dialect_names, open_instrument


def test_every_dialect_has_a_live_speaker() -> None:
    assert set(DIALECTS) == set(dialect_names())


@pytest.mark.parametrize("dialect", sorted(DIALECTS))
def test_a_bench_is_read_alike_in_every_dialect(dialect) -> None:
    """The same seed is the same unit: amplitude and interval must agree whatever is spoken."""
    with (
        Bench(3, dialect=dialect) as bench,
        open_instrument(bench.resource, dialect=dialect) as source,
    ):
        taken = source.capture()
    assert taken.samples.size == 10_000
    assert taken.interval_s == pytest.approx(1e-6, rel=1e-9)
    assert taken.coupling == "DC"
    lowest, highest = np.quantile(taken.samples, [0.01, 0.99])
    reference = REFERENCE.setdefault("bench", (lowest, highest))
    assert (lowest, highest) == pytest.approx(reference, abs=0.11)


REFERENCE: dict[str, tuple[float, float]] = {}

RANGED = sorted(set(DIALECTS))


def settings_of(bench: Bench) -> tuple[float, float]:
    settings = bench.instrument.settings
    return settings.full_scale_v, settings.offset_v


@pytest.mark.parametrize("dialect", RANGED)
@pytest.mark.parametrize("gain", [0.05, 1.6], ids=["small", "clipped"])
def test_range_and_offset_use_the_codes_and_are_put_back(dialect, gain) -> None:
    fault = "low-level" if gain < 1.0 else "clipped"
    with Bench(3, dialect=dialect, fault=fault) as bench:
        before = settings_of(bench)
        with open_instrument(bench.resource, dialect=dialect, set_range=True) as source:
            taken = source.capture(CaptureRequest(timeout_s=10.0))
            full, _ = settings_of(bench)
            share = np.ptp(taken.samples) / full
            assert 0.5 < share < 0.97
            assert taken.clipped == 0
        assert settings_of(bench) == pytest.approx(before)


def test_range_is_left_alone_unless_asked_for() -> None:
    with Bench(3, fault="low-level") as bench, open_instrument(bench.resource) as source:
        before = settings_of(bench)
        source.capture()
        assert settings_of(bench) == before


@pytest.mark.parametrize(
    "dialect", ["ten-field", "ten-field-code", "ten-field-signed", "keyword-curve", "data-header"]
)
def test_averages_give_true_bits_and_are_put_back(dialect) -> None:
    with Bench(3, dialect=dialect) as bench:
        with open_instrument(bench.resource, dialect=dialect) as source:
            plain = source.capture()
            averaged = source.capture(CaptureRequest(average=16, timeout_s=10.0))
            assert averaged.averaged == 16
            assert plain.bits is not None
            assert averaged.bits is not None
            assert averaged.bits > plain.bits
            again = source.capture()
            assert again.averaged == 1
            source.capture(CaptureRequest(average=16, timeout_s=10.0))
        assert bench.instrument.settings.average == 1


def test_deep_memory_comes_in_windows_and_whole() -> None:
    with (
        Bench(3, dialect="ten-field-code") as bench,
        open_instrument(bench.resource, dialect="ten-field-code") as source,
    ):
        bench.instrument.set_points(300_000)
        taken = source.capture(CaptureRequest(timeout_s=10.0))
        assert taken.samples.size == 300_000
        steps = np.abs(np.diff(taken.samples))
        assert steps.max() < 20 * np.median(steps[steps > 0.0])
