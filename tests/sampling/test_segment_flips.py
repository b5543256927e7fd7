"""The draw of flipped segments, enumerated."""

import itertools

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from quarterturn.compiled.precision import double
from quarterturn.sampling.moves.segment_flip import segment_flips


def flips(broken: np.ndarray, coins: np.ndarray, first: np.ndarray) -> np.ndarray:
    with double():
        return np.asarray(jax.jit(segment_flips)(jnp.asarray(broken), jnp.asarray(coins), jnp.asarray(first)))


def walked(broken: np.ndarray, coins: np.ndarray, first: bool) -> np.ndarray:
    """The same site by site, as the words of the method say it."""
    change = broken & coins
    where = np.flatnonzero(broken)
    if len(where):
        change[where[-1]] = np.sum(change[where[:-1]]) % 2 == 1
    flipped = [bool(first)]
    for link in change[:-1]:
        flipped.append(flipped[-1] ^ bool(link))
    return np.array(flipped)


@pytest.mark.parametrize("sites", [3, 4, 5])
def test_each_flip_of_whole_segments_is_equally_likely(sites: int) -> None:
    """All broken links, coins and first sites: bonded sites flip together, and every such flip arises equally often."""
    everything = np.array(list(itertools.product((False, True), repeat=sites)))
    coins, first = np.repeat(everything, 2, axis=0), np.tile([False, True], len(everything))
    for broken in everything:
        found = flips(np.broadcast_to(broken, coins.shape), coins, first)
        joined = ~broken
        assert not np.any((found != np.roll(found, -1, axis=1))[:, joined])
        patterns, counts = np.unique(found, axis=0, return_counts=True)
        segments = max(1, int(broken.sum()))
        assert len(patterns) == 2**segments
        assert len(set(counts)) == 1


@pytest.mark.parametrize("sites", [31, 32, 65, 200])
def test_words_of_bits_give_what_walking_along_the_path_gives(sites: int) -> None:
    """Few, many and all links broken."""
    rng = np.random.default_rng(sites)
    share = np.repeat([0.02, 0.3, 1.0], 40)[:, None]
    broken, coins = rng.random((120, sites)) < share, rng.random((120, sites)) < 0.5
    first = rng.random(120) < 0.5
    expected = [walked(b, c, f) for b, c, f in zip(broken, coins, first, strict=True)]
    assert np.array_equal(flips(broken, coins, first), np.array(expected))


def test_without_broken_links_the_whole_path_flips_or_stays() -> None:
    none = np.zeros((2, 70), bool)
    found = flips(none, ~none, np.array([False, True]))
    assert not found[0].any() and found[1].all()
