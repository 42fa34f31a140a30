from itertools import combinations

import numpy as np
from siting.selection_networks import BAD, planted, tables_of

from massfit.posterior.node_integral import SubsetMoments
from massfit.siting.subset_sizes import SubsetSizes, answer_sizes, random_subsets


def test_all_subsets_of_a_size_where_there_are_few():
    kept = random_subsets(5, 100, np.random.default_rng(1))
    assert len(kept) == 2**5 - 1
    assert len({tuple(row) for row in kept.tolist()}) == len(kept)


def test_random_subsets_take_every_site_equally_often():
    kept = random_subsets(12, 60, np.random.default_rng(2))
    half = kept[kept.sum(axis=1) == 6]
    share = half.mean(axis=0)
    # binomial: 60 subsets, half of the sites each; 4 standard deviations
    assert np.abs(share - 0.5).max() < 4 * 0.5 / np.sqrt(60)


def test_the_same_seed_gives_the_same_subsets():
    first, second = (random_subsets(9, 10, np.random.default_rng(7)) for _ in range(2))
    np.testing.assert_array_equal(first, second)


def test_random_subsets_find_the_bad_site():
    """Subsets with the bad site are wider than those without; no other site widens them so."""
    tables = tables_of(*planted(), "normal")
    found = answer_sizes(tables, 40, np.random.default_rng(1))
    middle = (found.size >= 4) & (found.size <= 7)
    width, kept = found.moments.width[middle], found.kept[middle]
    gap = [width[kept[:, s]].mean() - width[~kept[:, s]].mean() for s in range(9)]
    assert int(np.argmax(gap)) == BAD
    assert gap[BAD] > 3.0 * np.delete(gap, BAD).max()


def test_the_smallest_network_must_last():
    kept = np.array([np.isin(np.arange(4), c) for k in range(1, 5) for c in combinations(range(4), k)])
    width = np.select([kept.sum(axis=1) == k for k in (1, 2, 3, 4)], [4.0, 1.0, 3.0, 1.0])
    covariance = width[:, None, None] ** 2 * np.eye(2)
    moments = SubsetMoments(np.zeros((15, 2)), covariance, np.zeros(15), np.zeros((15, 3)))
    sizes = SubsetSizes(kept, moments)
    assert sizes.smallest(3.0, 1.0) == 2
    assert sizes.smallest(2.0, 1.0) == 4  # two sites would do, three would not
    assert sizes.smallest(0.5, 0.5) is None
