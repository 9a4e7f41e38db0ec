"""The output stage against its own differential equation, solved by another library."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from drivers.bench.output import OutputStage
from drivers.bench.unit import crest_frame

N = 2048
PHASE = 2.0 * np.pi * np.arange(N) / N
WAVE = 2.5 * (np.sin(PHASE) + 0.01 * np.sin(3.0 * PHASE) + 0.004 * np.cos(2.0 * PHASE))


def exact(stage: OutputStage, wave: np.ndarray, hertz: float) -> np.ndarray:
    """Third period of the equation, by an adaptive solver."""
    times = np.arange(wave.size + 1) / (wave.size * hertz)
    closed = np.append(wave, wave[0])
    stiff = 2.0 * np.pi * stage.unity_hz / stage.slew_v_s

    def rate(t: float, v: np.ndarray) -> np.ndarray:
        u = np.interp(t % (1.0 / hertz), times, closed)
        return stage.slew_v_s * np.tanh(stiff * (u - v / stage.gain))

    solved = solve_ivp(
        rate, (0.0, 3.0 / hertz), [0.0], t_eval=2.0 / hertz + times[:-1],
        rtol=1e-8, atol=1e-9, max_step=4.0 / (wave.size * hertz), method="RK45",
    )  # fmt: skip
    return solved.y[0]


@pytest.mark.parametrize("hertz", [5e3, 12e3, 18e3, 25e3])
def test_it_solves_its_own_equation(hertz: float) -> None:
    stage = OutputStage(gain=2.0, slew_v_s=0.515e6, unity_hz=1.5e6)
    quick, slow = stage.drive(WAVE, hertz), exact(stage, WAVE, hertz)
    assert np.max(np.abs(quick - slow)) < 4e-3  # of 5 V
    np.testing.assert_allclose(crest_frame(quick)[:6], crest_frame(slow)[:6], atol=6e-5)


def test_far_below_the_slew_rate_it_is_a_lag_of_gain_over_unity_frequency() -> None:
    stage = OutputStage(gain=2.0, slew_v_s=1e12, unity_hz=1e6)
    out = np.fft.rfft(stage.drive(WAVE, 20e3))
    put = np.fft.rfft(WAVE)
    for order in (1, 2, 3):
        wanted = 2.0 / (1.0 + 1j * order * 20e3 * 2.0 / 1e6)
        assert out[order] / put[order] == pytest.approx(wanted, rel=1e-9)


@pytest.mark.parametrize(("ratio", "crest", "skew"), [(0.9, 0.018, -0.011), (0.8, 0.059, -0.012)])
def test_an_ideal_limiter_gives_the_known_third_order(
    ratio: float, crest: float, skew: float
) -> None:
    # Source: an ideal limiter of slope, computed beside the definition of crest and skew parts.
    hertz, amplitude = 10e3, 5.0
    stage = OutputStage(1.0, ratio * 2.0 * np.pi * hertz * amplitude, unity_hz=200e6)
    third = crest_frame(stage.drive(amplitude * np.sin(PHASE[::2]), hertz))[1]
    assert third.real == pytest.approx(crest, abs=0.0015)
    assert -third.imag == pytest.approx(skew, abs=0.0015)


def test_at_an_audio_frequency_it_hardly_shows() -> None:
    stage = OutputStage(gain=2.0, slew_v_s=0.515e6, unity_hz=1.5e6)
    clean = 2.5 * np.sin(PHASE)
    assert np.linalg.norm(crest_frame(stage.drive(clean, 1e3))) < 2e-6
