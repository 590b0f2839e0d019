import numpy as np
import pytest

from rcbench.shots.evidence.bit_order import Runs, best_told, candidate_orders, permutations
from rcbench.shots.evidence.cases import Case
from rcbench.shots.evidence.orders import Order, identity, named_orders, words
from rcbench.shots.evidence.pools import match
from rcbench.shots.evidence.return_pool import return_pool
from rcbench.shots.evidence.sampled_pool import sampled_pool, walsh_transform
from rcbench.shots.evidence.stuck import inverted_bits, stuck_bits


class Row:
    def __init__(self, depth):
        self.depth, self.base_id, self.target = depth, f"c{depth}", ""


def cases_of(rng, n, circuits, fidelity, shots, deliver, targets=None):
    """Runs of circuits with Porter-Thomas outcomes (or one string each), the bits delivered somehow."""
    out, ideals = [], []
    for number in range(circuits):
        if targets is None:
            p = rng.exponential(size=2**n)
            p /= p.sum()
        else:
            p = np.zeros(2**n)
            p[targets[number]] = 1.0
        counts = rng.multinomial(shots, fidelity * p + (1 - fidelity) / 2**n)
        index = deliver(np.flatnonzero(counts))
        target = None if targets is None else int(targets[number])
        out.append(Case((f"c{number}", 0), Row(number % 2), n, index, counts[counts > 0], target))
        ideals.append(p)
    return out, ideals


def delivered(order):
    """What arrives if true bit j is written at place source[j]."""
    n = len(order.source)

    def deliver(index):
        out = np.zeros_like(index)
        for bit, place in enumerate(order.source):
            out |= ((index >> (n - 1 - bit) & 1) ^ (bit in order.flipped)) << (n - 1 - place)
        return out

    return deliver


def pool_of(cases, ideals):
    return sampled_pool(cases, ideals)


def told(pool, doubtful=None, **how):
    runs = Runs(pool, list(range(len(pool.starts))) if doubtful is None else doubtful)
    return best_told([runs.told(*one) for one in [*inverted_bits(runs), *candidate_orders(runs, **how)]])


@pytest.mark.parametrize("n", [5, 8, 12])
def test_named_orders_are_different_and_none_is_the_identity(n):
    orders = named_orders(n, [f"Q{9 - k}" if k < 9 else f"Q{k}" for k in range(n)])
    assert len({(order.source, order.flipped) for order in orders}) == len(orders)
    assert not any(order.is_identity for order in orders)
    assert all(sorted(order.source) == list(range(n)) for order in orders)


def test_text_order_puts_ten_before_two():
    """Bits written in the order 0, 1, 10, 11, 2, ...: bit 10 stands in place 2."""
    order = next(o for o in named_orders(12) if o.name == "sorted as text, numbered from 0")
    assert order.source[10] == 2
    assert order.source[2] == 4


def test_an_order_undoes_its_delivery():
    rng = np.random.default_rng(0)
    order = Order("", tuple(rng.permutation(9).tolist()), (2, 7))
    index = rng.integers(0, 2**9, 100)
    assert np.array_equal(order.mended(delivered(order)(index)), index)


def test_a_permutation_keeps_two_to_the_minus_moved_bits_plus_cycles_of_the_cross_entropy():
    """One exchange keeps a half, three bits in turn a quarter; mean over 300 Porter-Thomas outcomes, 4 sigmas."""
    rng, n = np.random.default_rng(1), 8
    states = rng.exponential(size=(300, 2**n))
    states /= states.sum(axis=1, keepdims=True)
    for source, kept in (((1, 0, 2, 3, 4, 5, 6, 7), 0.5), ((1, 2, 0, 3, 4, 5, 6, 7), 0.25)):
        moved = delivered(Order("", source))(np.arange(2**n))
        xeb = 2**n * (states * states[:, moved]).sum(axis=1) - 1
        assert abs(xeb.mean() - kept) < 4 * xeb.std() / np.sqrt(300) + 2 ** -(n - 1)


def test_walsh_coefficients_are_mean_products_of_z():
    rng, n = np.random.default_rng(2), 5
    p = rng.dirichlet(np.ones(2**n))
    z = 1 - 2 * (np.arange(2**n)[:, None] >> np.arange(n - 1, -1, -1) & 1)
    found = walsh_transform(p)
    assert found[0b10010] == pytest.approx(float(p @ (z[:, 0] * z[:, 3])), abs=1e-14)


def test_matching_leaves_alike_bits_where_they_are():
    table = np.ones((4, 4))
    assert match(table, None) == (0, 1, 2, 3)


@pytest.mark.parametrize(
    ("order", "fidelity"),
    [
        (Order("", (7, 6, 5, 4, 3, 2, 1, 0)), 0.2),
        (Order("", (3, 0, 7, 1, 6, 2, 4, 5)), 0.5),
        (Order("", (0, 1, 2, 5, 4, 3, 6, 7)), 0.3),
        (Order("", tuple(range(8)), (3,)), 0.2),
        (Order("", tuple(range(8)), tuple(range(8))), 0.2),
        (Order("", tuple(range(8)), (1, 4, 6)), 0.3),
    ],
    ids=["reversed", "shuffled", "exchanged", "one inverted", "all inverted", "three inverted"],
)
def test_an_order_of_sampled_circuits_is_found(order, fidelity):
    rng = np.random.default_rng(3)
    pool = pool_of(*cases_of(rng, 8, 6, fidelity, 4000, delivered(order)))
    found = told(pool)
    assert found is not None
    assert (found.order.source, found.order.flipped) == (order.source, order.flipped)
    assert found.gain > found.limit
    assert found.held_out > found.held_limit
    assert words(found.order)


def test_strings_that_return_give_the_order_at_once():
    rng, n = np.random.default_rng(4), 20
    order = Order("", tuple(rng.permutation(n).tolist()))
    targets = rng.integers(0, 2**n, 12)
    cases, _ = cases_of(rng, n, 12, 0.2, 300, delivered(order), targets)
    found = told(return_pool(cases))
    assert found is not None
    assert found.order.source == order.source


def test_equal_targets_tell_no_order():
    rng, n = np.random.default_rng(5), 6
    cases, _ = cases_of(rng, n, 8, 0.5, 500, delivered(Order("", (5, 4, 3, 2, 1, 0))), np.zeros(8, dtype=int))
    assert told(return_pool(cases)) is None


@pytest.mark.parametrize("fidelity", [0.0, 0.3, 1.0])
def test_shots_in_order_give_no_order(fidelity):
    rng = np.random.default_rng(6)
    for _ in range(5):
        assert told(pool_of(*cases_of(rng, 6, 5, fidelity, 3000, lambda index: index))) is None


def test_shots_of_other_circuits_give_no_order():
    rng = np.random.default_rng(7)
    for _ in range(5):
        cases, _ = cases_of(rng, 6, 5, 0.6, 3000, lambda index: index)
        _, others = cases_of(rng, 6, 5, 0.6, 3000, lambda index: index)
        assert told(pool_of(cases, others)) is None


def test_the_runs_that_are_right_decide_between_exchanged_and_inverted_bits():
    """On strings of which two bits differ, exchanging these is inverting both; the other strings bear the exchange."""
    rng, n = np.random.default_rng(8), 8
    order = Order("", (1, 0, 2, 3, 4, 5, 6, 7))
    targets = rng.integers(0, 2**n, 12)
    cases, _ = cases_of(rng, n, 12, 0.6, 1000, delivered(order), targets)
    differ = [k for k, t in enumerate(targets) if (t >> 7 & 1) != (t >> 6 & 1)]
    assert 2 < len(differ) < 12
    found = told(return_pool(cases), differ)
    assert found is not None
    assert (found.order.source, found.order.flipped) == (order.source, ())


def test_permutations_are_counted_by_the_bits_they_move():
    exchange = Order("", (1, 0, 2, 3, 4, 5))
    assert permutations(exchange, 6) == pytest.approx(np.log(6 * 5) + np.log(6))
    assert permutations(identity(6), 6) == pytest.approx(np.log(6))


def test_a_stuck_bit_is_told_and_a_relaxed_one_is_not():
    shots = np.full(10, 2000.0)
    ideal = np.full((10, 4), 0.5)
    ones = np.full((10, 4), 0.47)
    ones[:, 1] = 0.0
    ones[:, 2] = 0.12  # most of it decayed, not stuck
    found = stuck_bits(ones, shots, ideal)
    assert [(bit.bit, bit.value) for bit in found] == [(1, 0)]
    ones[:, 1] = 1.0
    assert [(bit.bit, bit.value) for bit in stuck_bits(ones, shots, ideal)] == [(1, 1)]


def test_a_bit_that_should_be_constant_is_not_stuck():
    assert stuck_bits(np.zeros((5, 3)), np.full(5, 1000.0), np.zeros((5, 3))) == []
