"""What sequences of entanglers reach: inequalities, Haar shares, necessity by random circuits."""

import itertools

import numpy as np
import pytest
import scipy.stats
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import GateSetError
from gatewright.linalg import haar_unitary, kron
from gatewright.synthesis.coverage import coverage
from gatewright.synthesis.entangler import reach_by_uses
from gatewright.synthesis.polytopes import FORMS, SETS, other_image, quantum_products, reached
from gatewright.synthesis.selection import select
from gatewright.synthesis.toolkit import cheapest_sequences
from gatewright.synthesis.weyl import canonical_coordinates, canonical_matrix, mirrored_coordinates

Q = np.pi / 4
CX, ISWAP, SQRT_ISWAP, B = (Q, 0, 0), (Q, Q, 0), (Q / 2, Q / 2, 0), (Q, Q / 2, 0)


def is_reached(points, polytope, margin=1e-9):
    return (polytope.excess(np.stack([points, other_image(points)])) <= margin).any(axis=0)


def random_products(points, size, rng):
    product = np.broadcast_to(np.eye(4, dtype=complex), (size, 4, 4))
    for point in points:
        local = kron(haar_unitary(2, size, rng=rng), haar_unitary(2, size, rng=rng))
        product = canonical_matrix(point) @ local @ product
    return canonical_coordinates(product)


def test_72_inequalities_and_the_ring_they_come_from():
    # 72 = 16 + 40 + 16; the quantum cohomology of P^3 is Z[h, q]/(h^4 - q), that of Gr(2, 4) has s1*s1 = s2 + s11 and
    # s1*s21 = s22 + q (Buch, Kresch & Tamvakis, JAMS 16, 901 (2003), section 8; from memory).
    first, second, result, degree = quantum_products()
    assert len(first) == 72
    assert [len(SETS[c]) for c in result].count(1) == 16
    table = {}
    for a, b, c, d in zip(first, second, result, degree, strict=True):
        table.setdefault((SETS[a], SETS[b]), set()).add((SETS[c], int(d)))
    # Sets number the phases from 0; the class h^p of P^3 is {3 - p}, and {i, j} has the partition (2 - i, 3 - j).
    for p, r in itertools.product(range(4), repeat=2):
        assert table[(3 - p,), (3 - r,)] == {((3 - (p + r) % 4,), (p + r) // 4)}
    s1, s2, s11, s21, s22 = (1, 3), (0, 3), (1, 2), (0, 2), (0, 1)
    assert table[s1, s1] == {(s2, 0), (s11, 0)}
    assert table[s1, s21] == {(s22, 0), ((2, 3), 1)}
    assert table[s2, s11] == {((2, 3), 1)}


@pytest.mark.parametrize(
    ("point", "shares", "mean"),
    [
        # Huang et al., PRL 130, 070601 (2023): two reach 0.79, x >= y + |z|; mean 2.21.
        (SQRT_ISWAP, [0, 0, 0.7901, 1], 2.2099),
        # Zhang, Vala, Sastry & Whaley, PRL 93, 020502 (2004): two B gates reach everything.
        (B, [0, 0, 1], 2),
        (CX, [0, 0, 0, 1], 3),
        (ISWAP, [0, 0, 0, 1], 3),
        # Recomputed for this project by an independent route (linear programs over the intermediate point).
        ((Q / 2, 0, 0), [0, 0, 0, 0.5, 0.95988, 0.99986, 1], 3.5402),
        ((Q / 3, 0, 0), None, 5.0016),
    ],
)
def test_published_haar_shares(point, shares, mean):
    found = coverage([("e", np.array(point))])
    assert found.mean_uses == pytest.approx(mean, abs=6e-5)
    if shares is not None:
        assert [level.share for level in found.levels] == pytest.approx(shares, abs=2e-5)
    assert sum(found.reach.values()) == pytest.approx(1, abs=1e-12)


def test_two_uses_of_the_root_of_iswap():
    points = canonical_coordinates(haar_unitary(4, 20000, rng=1))
    expected = points[:, 0] >= points[:, 1] + np.abs(points[:, 2])
    two = reached([SQRT_ISWAP] * 2)
    assert (is_reached(points, two, 0) == expected).all()
    # 0.94361 with the outputs free to be exchanged (recomputed for this project by Monte Carlo).
    free = expected | is_reached(mirrored_coordinates(points), two, 0)
    assert abs(free.mean() - 0.94361) < 4 * np.sqrt(0.94 * 0.06 / 20000)


@given(st.lists(st.floats(0.01, Q), min_size=1, max_size=5), st.integers(0, 2**32))
@settings(deadline=None, max_examples=100)
def test_inequalities_of_xx_sequences(strengths, seed):
    # Peterson, Bishop & Javadi-Abhari, Quantum 6, 696 (2022).
    polytope = reached([(a, 0, 0) for a in strengths])
    first, second = [*sorted(strengths, reverse=True), 0.0][:2]
    total = sum(strengths)
    x, y, z = canonical_coordinates(haar_unitary(4, 200, rng=seed)).T
    margins = []
    for big in (x, np.pi / 2 - x):
        margins.append(np.min([total - big - y - np.abs(z), total - 2 * first + big - y - np.abs(z)], axis=0))
        margins[-1] = np.minimum(margins[-1], total - first - second - np.abs(z))
    margin = np.max(margins, axis=0)
    found = is_reached(np.stack([x, y, z], axis=1), polytope, 0)
    clear = np.abs(margin) > 1e-9
    assert (found[clear] == (margin[clear] > 0)).all()


@given(st.integers(2, 4), st.integers(0, 2**32))
@settings(deadline=None, max_examples=60)
def test_random_circuits_never_leave_the_polytope(k, seed):
    rng = np.random.default_rng(seed)
    sequence = canonical_coordinates(haar_unitary(4, k, rng=rng))
    if seed % 2:
        sequence[:] = sequence[0]
    products = random_products(sequence, 200, rng)
    assert is_reached(products, reached(sequence), 1e-13).all()
    # Local gates of the Weyl group lead to vertices: the hardest products.
    assert is_reached(canonical_coordinates(canonical_matrix(sequence.sum(axis=0)))[None], reached(sequence), 1e-13)[0]


def test_order_does_not_matter():
    sequence = canonical_coordinates(haar_unitary(4, 4, rng=3))
    bounds = [reached(sequence[list(order)]).bounds for order in itertools.permutations(range(4))]
    assert np.ptp(bounds, axis=0).max() < 1e-14


def test_vertices_satisfy_every_inequality_and_span_the_halfspaces():
    for seed in range(5):
        point = canonical_coordinates(haar_unitary(4, rng=seed))
        for k in (1, 2, 3):
            polytope = reached([point] * k)
            assert (polytope.vertices @ FORMS.T - polytope.bounds >= -1e-10).all()
            normals, offsets = polytope.halfspaces
            assert (polytope.vertices @ normals.T - offsets >= -1e-10).all()
            assert (np.abs(polytope.vertices @ normals.T - offsets) < 1e-9).any(axis=0).all()
            weights = scipy.stats.dirichlet.rvs(np.ones(len(polytope.vertices)), 50, random_state=seed)
            assert (polytope.excess(weights @ polytope.vertices) <= 1e-12).all()


def test_nearest_point_is_near_and_inside():
    polytope = reached([SQRT_ISWAP] * 2)
    rng = np.random.default_rng(4)
    for epsilon in (1e-1, 1e-4, 1e-8, 1e-11):
        point = np.array([Q / 2, Q / 2, 0]) + epsilon * np.array([0, 0, 0.4])
        nearest, gap = polytope.nearest(point)
        assert polytope.excess(nearest) <= 1e-15
        assert polytope.excess(point) <= gap * (1 + 1e-6)
        two = np.sort(np.abs(nearest - point))[1:].sum()
        assert gap == pytest.approx(two, rel=1e-6)
        # No random point of the polytope is nearer.
        others = rng.dirichlet(np.full(len(polytope.vertices), 0.3), 20000) @ polytope.vertices
        assert np.sort(np.abs(others - point), axis=1)[:, 1:].sum(axis=1).min() >= gap * (1 - 1e-9)


def test_tolerance_gives_fewer_uses_and_tells_the_distance():
    by_uses = reach_by_uses(SQRT_ISWAP)
    point = np.array([[0.5, 0.3, 0.2 + 1e-4]])
    assert select(point, by_uses, 1e-12).index == 3
    chosen = select(point, by_uses, 1e-3)
    assert chosen.index == 2
    assert 0.3e-4 < chosen.distance[0] < 1.1e-4
    gap = 2 * np.sin(0.5 * np.sort(np.abs(chosen.points - point))[0, 1:].sum())
    assert chosen.distance[0] == pytest.approx(gap, rel=1e-9)


def test_weak_entanglers_and_the_cap():
    assert len(reach_by_uses((Q / 12, 0, 0))) - 1 == 36
    with pytest.raises(GateSetError, match="so weak.*at most 64 uses.*0.01"):
        reach_by_uses((0.01, 0, 0))
    with pytest.raises(GateSetError, match="at most 3 uses"):
        reach_by_uses((Q / 2, 0, 0), most=3)


def test_cheapest_sequences_are_in_order_and_end_with_everything():
    points = (SQRT_ISWAP, CX)
    found = cheapest_sequences(points, ((0.5, 1.0), (0.6, 1.0)))
    prices = [sum((0.5, 0.6)[i] for i in members) for members, _ in found]
    assert prices == sorted(prices)
    assert [polytope.covers_all for _, polytope in found] == [False] * (len(found) - 1) + [True]
