"""Clique cover: every conflict inside a clique, every clique a true and maximal one."""

import networkx
import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.sensing.cliques import clique_cover


def random_graph(n, density, seed):
    upper = np.triu(np.random.default_rng(seed).random((n, n)) < density, 1)
    return upper | upper.T


def check(conflict, cliques):
    covered = np.zeros_like(conflict)
    for clique in cliques:
        assert len(clique) >= 2
        assert (np.diff(clique) > 0).all()
        block = conflict[np.ix_(clique, clique)]
        assert (block | np.eye(len(clique), dtype=bool)).all()
        others = conflict[clique].all(axis=0)
        others[clique] = False
        assert not others.any()  # maximal
        covered[np.ix_(clique, clique)] = True
    assert (covered | ~conflict).all()


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 25), st.floats(0, 1), st.integers(0, 10**6))
def test_any_graph(n, density, seed):
    conflict = random_graph(n, density, seed)
    check(conflict, clique_cover(conflict))


@settings(deadline=None, max_examples=20)
@given(st.integers(2, 60), st.floats(0.05, 0.6), st.integers(0, 10**6))
def test_points_nearer_than_a_spacing(n, spacing, seed):
    points = np.random.default_rng(seed).random((n, 2))
    conflict = np.linalg.norm(points[:, None] - points[None], axis=2) < spacing
    np.fill_diagonal(conflict, False)
    cliques = clique_cover(conflict)
    check(conflict, cliques)
    assert [c.tolist() for c in cliques] == [c.tolist() for c in clique_cover(conflict)]


def test_cover_is_small():
    """A complete graph is one clique; disjoint cliques are found one by one; near the number of all maximal
    cliques else.
    """
    assert len(clique_cover(~np.eye(7, dtype=bool))) == 1
    blocks = np.kron(np.eye(4, dtype=bool), np.ones((5, 5), dtype=bool))
    assert len(clique_cover(blocks)) == 4
    graph = random_graph(20, 0.5, 3)
    assert len(clique_cover(graph)) <= sum(1 for _ in networkx.find_cliques(networkx.from_numpy_array(graph)))


def test_no_conflicts():
    assert clique_cover(np.zeros((5, 5), dtype=bool)) == []
