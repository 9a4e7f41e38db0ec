"""Ids: UUID version 7 as RFC 9562 lays it out, growing whatever the clock does."""

from __future__ import annotations

import time
import uuid
from concurrent.futures import ThreadPoolExecutor

import pytest

from trimmer.book.ids import Ids, is_id


def test_an_id_has_the_version_the_variant_and_the_time_of_rfc_9562() -> None:
    before = time.time_ns() // 1_000_000
    new = uuid.UUID(Ids().new())
    after = time.time_ns() // 1_000_000
    # RFC 9562, section 5.7: 48 bits of Unix milliseconds, version 7, variant 10.
    assert new.version == 7
    assert new.variant == uuid.RFC_4122
    assert before <= new.int >> 80 <= after


def test_ids_of_many_threads_differ_and_those_of_one_grow() -> None:
    ids = Ids()
    with ThreadPoolExecutor(8) as pool:
        given = list(pool.map(lambda _: [ids.new() for _ in range(2000)], range(8)))
    assert all(each == sorted(each) for each in given)
    assert len({new for each in given for new in each}) == 16_000


def test_two_benches_never_give_the_same_id() -> None:
    first, second = Ids(), Ids()
    given = {bench.new() for _ in range(5000) for bench in (first, second)}
    assert len(given) == 10_000


def test_a_clock_set_back_does_not_break_the_order(monkeypatch: pytest.MonkeyPatch) -> None:
    ids = Ids()
    now = time.time_ns()
    given = [ids.new()]
    monkeypatch.setattr(time, "time_ns", lambda: now - 3600 * 10**9)
    given += [ids.new() for _ in range(10_000)]  # more than the 4096 a millisecond holds
    assert given == sorted(set(given))


def test_ids_go_on_after_one_of_a_bench_whose_clock_is_ahead() -> None:
    ahead, here = Ids(), Ids()
    moment = (time.time_ns() // 1_000_000 + 3_600_000) << 80
    seen = str(uuid.UUID(int=moment | 7 << 76 | 5 << 64 | 2 << 62))
    ahead.after(seen)
    here.after(ahead.new())
    assert here.new() > ahead.new()[:18]
    assert here.new() > seen


def test_one_wrong_clock_does_not_spoil_the_ids_of_the_others() -> None:
    ids = Ids()
    ids.after("ffffffff-ffff-7fff-bfff-ffffffffffff")
    assert uuid.UUID(ids.new()).int >> 80 < (time.time() + 60) * 1000


@pytest.mark.parametrize(
    "text",
    [
        "",
        "x",
        "01a231db-23a5-4000-a03d-0fa6a5679b9f",
        "01A231DB-23A5-7000-A03D-0FA6A5679B9F",
        "01a231db23a57000a03d0fa6a5679b9f",
        "01a231db-23a5-7000-a03d-0fa6a5679b9f\n",
    ],
)
def test_what_is_no_id_is_told_apart(text: str) -> None:
    assert not is_id(text)
    assert is_id(Ids().new())
