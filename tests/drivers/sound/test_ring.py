"""The ring's clock work, on invented arrivals."""

from __future__ import annotations

import threading
import time

import numpy as np
import pytest

from drivers.soundcard.ring import Ring

RATE = 1000.0
BLOCK = 10


class Server:
    """Hands numbered frames to a ring, at times of its own choosing."""

    def __init__(self, size=2000):
        self.ring = Ring(size, 2, RATE)
        self.made = 0

    def block(self):
        numbers = np.arange(self.made, self.made + BLOCK)
        self.made += BLOCK
        return np.column_stack([numbers, -numbers]).astype(np.int32)

    def in_time(self, count, start=100.0):
        for _ in range(count):
            block = self.block()
            self.ring.push(block, start + self.made / RATE, gap=False)

    def now(self, start=100.0):
        return start + self.made / RATE


def test_the_newest_frames_come_in_order_across_the_ring_s_seam():
    server = Server(size=64)
    server.in_time(33)
    piece = server.ring.newest(50, -np.inf, 0.0)
    assert piece is not None
    assert piece.frames[:, 0].tolist() == list(range(280, 330))
    assert piece.frames[:, 1].tolist() == list(range(-280, -330, -1))


def test_a_block_longer_than_the_ring_leaves_its_end():
    ring = Ring(16, 1, RATE)
    ring.push(np.arange(40, dtype=np.int32)[:, None], 1.0, gap=False)
    piece = ring.newest(16, -np.inf, 0.0)
    assert piece is not None
    assert piece.frames[:, 0].tolist() == list(range(24, 40))


def test_no_frame_is_given_twice():
    server = Server()
    server.in_time(20)
    assert server.ring.newest(100, -np.inf, 0.0) is not None
    assert server.ring.newest(100, -np.inf, 0.0) is None
    server.in_time(10)
    piece = server.ring.newest(100, -np.inf, 0.0)
    assert piece is not None
    assert piece.frames[0, 0] == 200


def test_frames_taken_before_the_wanted_instant_are_not_given():
    server = Server()
    server.ring.latency_s = 0.02
    server.in_time(100)
    since = server.now() - 0.12
    assert server.ring.newest(101, since, 0.0) is None
    piece = server.ring.newest(99, since, 0.0)
    assert piece is not None
    assert piece.taken == pytest.approx(server.now() - 0.02)


def test_a_backlog_is_late_and_gives_nothing_until_it_has_been_caught_up():
    server = Server()
    server.in_time(100)
    stalled_until = server.now() + 0.5
    for _ in range(30):  # 0.3 s of old sound in one go
        server.ring.push(server.block(), stalled_until, gap=False)
    assert server.ring.late_s == pytest.approx(0.2, abs=0.002)
    assert server.ring.newest(10, -np.inf, 0.0) is None
    for _ in range(20):
        server.ring.push(server.block(), stalled_until, gap=False)
    assert server.ring.late_s == pytest.approx(0.0, abs=0.002)
    server.in_time(20)
    piece = server.ring.newest(100, stalled_until, 0.0)
    assert piece is not None
    assert piece.frames[0, 0] >= 1500
    assert piece.breaks == 1


def test_a_gap_that_nobody_reports_shows_as_lateness_that_stays():
    server = Server()
    server.in_time(100)
    for _ in range(50):  # 0.4 s of sound lost, then in time again
        block = server.block()
        server.ring.push(block, 100.4 + server.made / RATE, gap=False)
    assert server.ring.late_s == pytest.approx(0.4, abs=0.002)
    assert server.ring.newest(10, -np.inf, 0.0) is None
    server.ring.restart()
    server.in_time(20, start=500.0)
    assert server.ring.newest(100, -np.inf, 0.0) is not None


def test_no_piece_reaches_across_a_reported_gap():
    server = Server()
    server.in_time(100)
    server.ring.push(server.block(), server.now() + 0.3, gap=True)
    for _ in range(5):
        block = server.block()
        server.ring.push(block, 100.3 + server.made / RATE, gap=False)
    assert server.ring.newest(61, -np.inf, 0.0) is None
    piece = server.ring.newest(60, -np.inf, 0.0)
    assert piece is not None
    assert piece.frames[0, 0] == 1000
    assert piece.breaks == 1


def test_a_slow_crystal_does_not_grow_late_in_an_hour():
    server = Server()
    slow = 1.0 + 300e-6
    worst = 0.0
    for _ in range(36000):
        block = np.zeros((100, 2), np.int32)
        server.made += 100
        server.ring.push(block, 100.0 + slow * server.made / RATE, gap=False)
        worst = max(worst, server.ring.late_s)
    assert worst < 0.001


def test_waiting_ends_with_the_arrival_or_with_the_time():
    server = Server()
    began = time.monotonic()
    assert server.ring.newest(10, -np.inf, 0.1) is None
    assert 0.09 < time.monotonic() - began < 1.0
    threading.Timer(0.05, server.in_time, (2,)).start()
    assert server.ring.newest(10, -np.inf, 5.0) is not None
    assert time.monotonic() - began < 2.0


def test_the_peak_is_a_part_of_full_scale_for_each_channel():
    ring = Ring(100, 2, RATE)
    assert ring.peak(10).tolist() == [0.0, 0.0]
    ring.push(np.array([[2**30, 0], [-(2**31), 2**29]], np.int32), 1.0, gap=False)
    assert ring.peak(10).tolist() == [1.0, 0.25]
    assert ring.peak(1).tolist() == [1.0, 0.25]
