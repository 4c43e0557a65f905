"""The compiled path search against a general shortest-path library, and runs of ink."""

import networkx as nx
import numpy as np
import pytest

from digitize.path import cheapest_path, run_at, sharp_edges

PX_PER_MM = 6.0
# prices as documented in digitize.path
GAP, INK, TURN, LEAN = 6.0 / PX_PER_MM, 0.012 / PX_PER_MM, 0.3, 0.03
LEVEL, CLIMB, SINK = 0, 1, 2


def _by_dijkstra(bare: np.ndarray, ahead: np.ndarray, ends: np.ndarray) -> float:
    """The same prices on an explicit graph: a node per column, row and mode."""
    rows, cols = bare.shape
    graph = nx.DiGraph()
    for r in range(rows):
        for mode in (LEVEL, CLIMB, SINK):
            graph.add_edge("in", (-1, r, mode), weight=ends[r] + (mode != LEVEL) * TURN)
            graph.add_edge((cols - 1, r, mode), "out", weight=ends[r])
    for c in range(cols):
        for r in range(rows):
            for mode in (LEVEL, CLIMB, SINK):
                for before in (LEVEL, CLIMB, SINK):
                    price = GAP * ahead[r, c] + (before != mode) * TURN
                    graph.add_edge((c - 1, r, before), (c, r, mode), weight=price)
            for step, mode in ((1, SINK), (-1, CLIMB)):
                if 0 <= r + step < rows:
                    price = INK + GAP * 0.5 * (bare[r, c] + bare[r + step, c])
                    graph.add_edge((c, r, mode), (c, r + step, mode), weight=price)
                    lean = LEAN + GAP * ahead[r + step, c]
                    graph.add_edge((c - 1, r, LEVEL), (c, r + step, LEVEL), weight=lean)
    return nx.dijkstra_path_length(graph, "in", "out")


@pytest.mark.parametrize("seed", range(8))
def test_no_path_is_cheaper_than_the_one_found(seed):
    rng = np.random.default_rng(seed)
    bare = (rng.random((11, 17)) ** 2).astype(np.float32)
    ahead = bare + (rng.random(bare.shape) < 0.1).astype(np.float32)
    ends = rng.random(11)
    span, price = cheapest_path(bare, ahead, ends, ends, PX_PER_MM)
    assert price == pytest.approx(_by_dijkstra(bare, ahead, ends), abs=1e-5)
    # neighbouring columns touch, or lean by one row
    assert (span[0, 1:] <= span[1, :-1] + 1).all()
    assert (span[1, 1:] >= span[0, :-1] - 1).all()


def test_the_path_climbs_a_broken_peak_rather_than_cross_bare_paper():
    bare = np.ones((60, 40), np.float32)
    bare[50, :12] = bare[50, 28:] = 0  # the level trace
    bare[10:51, 12] = bare[10:51, 28] = 0  # flanks 16 px apart
    bare[10, 12:29] = 0
    ends = np.zeros(60)
    span, _ = cheapest_path(bare, bare, ends, ends, PX_PER_MM)
    assert span[0].min() == 10


def test_a_run_is_taken_whole_where_the_path_only_touches_it():
    density = np.zeros((12, 3), np.float32)
    density[3:8, 1] = 1.0
    run = run_at(density, np.array([[7, 7, 7], [7, 7, 7]]), 0.5, 0)
    assert run.tolist() == [[-1, 3, -1], [-1, 7, -1]]


def test_edges_stand_where_the_density_crosses_the_level():
    density = np.zeros((9, 1), np.float32)
    density[2:7, 0] = (0.25, 1.0, 1.0, 1.0, 0.25)
    edges = sharp_edges(density, np.array([[3], [5]]), 0.5)
    # linear between 0.25 at row 2 and 1 at row 3: 0.5 stands a third of a row above row 2
    assert edges[:, 0] == pytest.approx([2 + 1 / 3, 6 - 1 / 3])


def test_no_ink_has_no_edges():
    edges = sharp_edges(np.zeros((5, 2), np.float32), np.full((2, 2), -1), 0.5)
    assert np.isnan(edges).all()
