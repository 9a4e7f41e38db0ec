"""What units teach of their kind."""

import json

import numpy as np
import pytest

from tests.fleet.catalogue import learn_from, prior, unit
from trimmer.guidance import KindPrior, Learned
from trimmer.guidance.field import FEATURES
from trimmer.guidance.general import column_scale, general_sigma
from trimmer.guidance.warp import Warp, warp_matrix


def field(seed=0, gain=1.0):
    """A kind's field, and units of it that differ a little and are wound their own way."""
    rng = np.random.default_rng(seed)
    k = np.repeat(np.arange(2, 16), 2)
    scale = gain * column_scale(15)
    weights = np.zeros((28, FEATURES))
    weights[:, 1] = scale
    weights[:, 2] = scale * np.where(k % 2 == 0, -1.0, 1.0)
    weights[:, 3] = 0.3 * scale * rng.standard_normal(28)
    weights[:, 0] = 0.002 * rng.standard_normal(28) / k
    return weights


def learned(weights, sigma=0.02):
    return Learned(
        orders=15,
        weights=weights,
        sigma=sigma * general_sigma(15) * np.array([0.0, *(1.0,) * 9]) + 1e-5,
        columns_sigma=0.1 * np.abs(weights[:, 1:3].T),
        travel_turns=0.75,
        fundamental_hz=1000.0,
    )


def units(count, seed=1, spread=0.05):
    rng = np.random.default_rng(seed)
    base = field()
    found = []
    for _ in range(count):
        own = base * (1.0 + spread * rng.standard_normal(base.shape))
        scales = rng.normal(1.0, 0.1, 2)
        found.append(learned(own @ warp_matrix(Warp(scales[0]), Warp(scales[1])).T))
    return found


def off(prior_, base):
    """How far a kind's columns are from the true ones, over their length."""
    return np.linalg.norm(prior_.weights[:, 1:3] - base[:, 1:3]) / np.linalg.norm(base[:, 1:3])


def test_more_units_make_a_surer_kind():
    base = field()
    assert off(KindPrior.from_units(units(12)), base) < 0.08
    few, many = (KindPrior.from_units(units(n)).sigma[0::2, 1:3] for n in (1, 12))
    assert np.all(many < few)


def test_one_odd_unit_does_not_spoil_the_kind():
    base = field()
    good = units(6)
    odd = learned(base @ warp_matrix(Warp(-1.0), Warp(1.0)).T)
    wild = learned(
        field(7, gain=2.0)[:, ::1] * np.random.default_rng(3).normal(1, 1, (28, FEATURES))
    )
    plain = KindPrior.from_units(good)
    for stranger in (odd, wild):
        spoiled = KindPrior.from_units([*good, stranger])
        assert off(spoiled, base) < off(plain, base) + 0.03


def test_the_order_of_the_units_does_not_matter():
    some = units(5)
    first, second = KindPrior.from_units(some), KindPrior.from_units(some[::-1])
    assert first.weights == pytest.approx(second.weights)
    assert first.sigma == pytest.approx(second.sigma)


def test_how_far_the_hand_turned_on_each_unit_is_evened_out():
    base = field()
    stretched = [
        learned(base @ warp_matrix(Warp(s), Warp(1.0 / s)).T) for s in (0.8, 0.9, 1.0, 1.1, 1.25)
    ]
    kind = KindPrior.from_units(stretched)
    assert off(kind, base) < 0.02
    assert np.all(kind.sigma[0::2, 1] < 0.12 * general_sigma(15)[0::2, 1])


def test_orders_beyond_the_known_ones_are_believed_in_general_only():
    kind = KindPrior.from_units(units(3))
    belief = kind.belief(20)
    assert belief.mean.shape == (38, FEATURES)
    assert belief.mean[:28] == pytest.approx(kind.weights)
    assert not belief.mean[28:].any()
    assert kind.belief(8).mean.shape == (14, FEATURES)


def test_units_read_to_different_orders_are_compared_over_the_common_ones():
    long = units(2)
    short = Learned(
        orders=9,
        weights=long[0].weights[:16],
        sigma=long[0].sigma[:16],
        columns_sigma=long[0].columns_sigma[:, :16],
        travel_turns=0.75,
        fundamental_hz=1000.0,
    )
    assert KindPrior.from_units([*long, short]).orders == 9


def test_documents_go_through_json_and_back():
    one = units(1)[0]
    back = Learned.from_document(json.loads(json.dumps(one.to_document())))
    assert back.weights == pytest.approx(one.weights)
    assert back.columns_sigma == pytest.approx(one.columns_sigma)
    kind = KindPrior.from_units(units(3))
    again = KindPrior.from_document(json.loads(json.dumps(kind.to_document())))
    assert again.weights == pytest.approx(kind.weights)
    assert again.units == 3


@pytest.mark.parametrize(
    "spoil",
    [
        {"version": 2},
        {"weights": [[1.0]]},
        {"sigma": [[float("nan")] * FEATURES] * 28},
        {"columns_sigma": []},
    ],
)
def test_a_document_that_is_none_is_refused(spoil):
    document = {**units(1)[0].to_document(), **spoil}
    with pytest.raises(ValueError, match=r"version|shape"):
        Learned.from_document(document)


def test_a_kind_of_no_unit_is_refused():
    with pytest.raises(ValueError, match="at least one"):
        KindPrior.from_units([])


def test_what_was_learned_is_frozen():
    one = units(1)[0]
    with pytest.raises(ValueError, match="read-only"):
        one.weights[0, 0] = 1.0


def test_a_unit_learned_by_turning_has_the_true_columns_in_all_but_scale():
    source = unit("ladders", 1, fold=1, wired=True)
    taught = learn_from("ladders", 1, True).learned
    assert taught is not None
    (u, v), _ = source.best()
    h = 1e-3
    for trim, sense in ((0, 1), (1, -1)):
        step = h * np.eye(2)[trim]
        plus, minus = (
            source.respond(u + step[0], v + step[1]),
            source.respond(u - step[0], v - step[1]),
        )
        true = sense * (plus - minus) / (2 * h)
        column = taught.columns[trim]
        cosine = column @ true / np.linalg.norm(column) / np.linalg.norm(true)
        assert cosine > 0.995
        assert np.linalg.norm(column) / np.linalg.norm(true) == pytest.approx(1.0, abs=0.3)


def test_a_kind_from_real_sessions_expects_what_the_next_unit_does():
    kind = prior("ladders", followed=True, units=4)
    belief = kind.belief(15)
    other = unit("ladders", 9, wired=True)
    (u, v), _ = other.best()
    h = 1e-3
    true = (other.respond(u + h, v) - other.respond(u - h, v)) / (2 * h)
    z = (true - belief.mean[:, 1])[0::2] / np.sqrt(belief.covariance[0::2, 1, 1])
    assert np.sqrt(np.mean(z**2)) < 2.0
