"""Histograms: every page is counted once, edges are round numbers."""

import numpy as np
import pytest

from measure.histogram import MOST_BINS, as_page, as_text, bin_edges, histogram


def test_every_page_is_counted_once_and_the_missing_too():
    values = [81.0, 84.0, 90.0, 150.0, None, 99.9, None]
    found = histogram("qrs_ms", values)
    assert found.missing == 2
    assert sum(found.counts) == 5


def test_a_value_on_an_edge_belongs_to_the_bin_above_it():
    found = histogram("qrs_ms", [100.0] * 5 + [120.0] * 3 + [140.0] * 2)
    low = [float(label.split(" to ")[0]) for label in found.labels]
    assert found.counts[low.index(120.0)] == 3


@pytest.mark.parametrize("seed", range(4))
def test_counts_agree_with_numpy_and_edges_are_round(seed):
    numbers = np.random.default_rng(seed).normal(100, 10.0**seed, 500 + 1000 * seed)
    edges = bin_edges(numbers)
    step = edges[1] - edges[0]
    assert edges[0] <= numbers.min()
    assert numbers.max() <= edges[-1]
    assert len(edges) - 1 <= MOST_BINS
    mantissa = step / 10 ** np.floor(np.log10(step * (1 + 1e-9)))
    assert np.isclose(mantissa, [1, 2, 2.5, 5], rtol=1e-6).any()
    found = histogram("x", numbers.tolist())
    assert found.counts == tuple(np.histogram(numbers, edges)[0].tolist())


def test_one_value_and_none_at_all():
    assert histogram("qrs_ms", [90.0, 90.0]).counts == (2,)
    nothing = histogram("qrs_ms", [None])
    assert (nothing.counts, nothing.missing) == ((), 1)
    assert as_text(nothing).splitlines()[-1].split() == ["missing", "1", "#" * 40]


def test_words_of_a_question_are_escaped_on_the_page():
    page = as_page(histogram("status", ["good", "<b>"]), "layout = '<script>'")
    assert "<script>" not in page
    assert "&lt;b&gt;" in page
