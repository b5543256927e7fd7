"""The generator against its published vectors, and what is drawn from it against the distributions it claims.

The statistical tests use fixed seeds; each states how often it would fail with another seed.
"""

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy import stats

from quarterturn.compiled.precision import double
from quarterturn.sampling import random

Floats = np.ndarray
SIZE = 1 << 19


def normals(seed: int, shape: tuple[int, ...] = (SIZE // 2,)) -> Floats:
    with double():
        z = np.asarray(random.complex_normals(random.seed_key(seed), shape))
    return np.concatenate([z.real, z.imag], axis=-1)


# Known answers of threefry2x32-20: file kat_vectors of Random123, the code of Salmon et al., SC '11 (2011).
KNOWN = [
    ((0, 0), (0, 0), (0x6B200159, 0x99BA4EFE)),
    ((0xFFFFFFFF, 0xFFFFFFFF), (0xFFFFFFFF, 0xFFFFFFFF), (0x1CB996FC, 0xBB002BE7)),
    ((0x13198A2E, 0x03707344), (0x243F6A88, 0x85A308D3), (0xC4923A9C, 0x483DF7A0)),
]


@pytest.mark.parametrize(("key", "counter", "expected"), KNOWN)
def test_words_are_the_published_ones(
    key: tuple[int, int], counter: tuple[int, int], expected: tuple[int, int]
) -> None:
    with double():
        found = random.threefry(jnp.array(key, jnp.uint32), *(jnp.array(c, jnp.uint32) for c in counter))
    assert tuple(int(w) for w in found) == expected


def test_words_are_those_of_the_default_generator_of_jax() -> None:
    """A second implementation, for a thousand counters."""
    from jax.extend.random import threefry_2x32

    with double():
        key = random.seed_key(2**40 + 17)
        first, second = (np.asarray(w) for w in random.words(key, (1000,), stream=3))
        counter = jnp.concatenate([jnp.arange(1000, dtype=jnp.uint32), jnp.full(1000, 3, jnp.uint32)])
        expected = np.asarray(threefry_2x32(key, counter))
    assert np.array_equal(np.concatenate([first, second]), expected)


def test_logarithm_is_right_to_two_units_in_the_last_place() -> None:
    rng = np.random.default_rng(1)
    x = np.concatenate([rng.random(100_000), 2.0 ** -rng.uniform(0, 60, 100_000), 1 - 2.0 ** -np.arange(1, 50)])
    with double():
        found = np.asarray(random.log(jnp.asarray(x)))
    assert np.max(np.abs(found / np.log(x) - 1)) < 5e-16


def test_sine_and_cosine_are_right_to_rounding() -> None:
    turn = np.concatenate([np.arange(0, 2**32, 2**15 + 1), 2**29 * np.arange(8), 2**29 * np.arange(1, 8) - 1])
    with double():
        sine, cosine = (np.asarray(f) for f in random.turn_sine_cosine(jnp.asarray(turn.astype(np.uint32))))
    angle = turn * (2 * np.pi / 2**32)
    assert np.max(np.abs(sine - np.sin(angle))) < 1e-15
    assert np.max(np.abs(cosine - np.cos(angle))) < 1e-15


def test_moments_of_the_normals_to_eighth_order() -> None:
    """(2k-1)!! and zero; each z-score is standard normal, false alarm rate 1e-4 for the sixteen together."""
    limit = stats.norm.isf(1e-4 / 2 / 16)
    for seed in (1, 2):
        x = normals(seed)
        for order in range(1, 9):
            exact = {0: stats.norm.moment(order), 1: stats.norm.moment(2 * order)}
            error = np.sqrt((exact[1] - exact[0] ** 2) / len(x))
            assert abs(np.mean(x**order) - exact[0]) < limit * error, (seed, order)


def test_normals_and_their_radii_have_the_right_distribution() -> None:
    """Kolmogorov-Smirnov for x, y and for |z|^2/2 (exponential), false alarm rate 3e-4 for the three together."""
    x = normals(3)
    half = len(x) // 2
    radius = (x[:half] ** 2 + x[half:] ** 2) / 2
    for sample, name in ((x[:half], "norm"), (x[half:], "norm"), (radius, "expon")):
        assert stats.kstest(sample, name).pvalue > 1e-4


def test_tails_of_the_normals_have_the_right_weight() -> None:
    """Counts beyond 3, 4 and 4.5, Poisson, false alarm rate 1e-4 each."""
    x = np.concatenate([normals(seed) for seed in range(4, 8)])
    for edge in (3.0, 4.0, 4.5):
        expected = len(x) * 2 * stats.norm.sf(edge)
        low, high = stats.poisson.interval(1 - 1e-4, expected)
        assert low <= np.sum(np.abs(x) > edge) <= high


def test_neighbours_and_streams_are_independent() -> None:
    """Correlations of x and of |z|^2 between neighbouring sites, chains, draws and streams; 4.5 sigma, 7e-6 each."""
    with double():
        key = random.seed_key(11)
        first, other, later = (
            np.asarray(random.complex_normals(random.child(key, draw), (64, 512), stream))
            for draw, stream in ((0, 0), (0, 1), (1, 0))
        )
    pairs = [
        (first[:, 1:], first[:, :-1]),
        (first[1:], first[:-1]),
        (first, later),
        (first, other),
        (first, 1j * first),
    ]
    for f in (np.real, lambda z: np.real(z) ** 2 - 1):
        for left, right in pairs:
            product = f(left) * f(right)
            assert abs(product.mean()) < 4.5 * product.std() / np.sqrt(product.size)


def test_bits_are_fair_and_pairs_of_bits_independent() -> None:
    """Chi-squared over the 64 single bits and over all their pairs, false alarm rate 2e-4."""
    with double():
        words = [np.asarray(w) for w in random.words(random.seed_key(12), (1 << 16,))]
    bits = np.concatenate([(w[:, None] >> np.arange(32, dtype=np.uint32)) & 1 for w in words], axis=1).astype(float)
    spins = 2 * bits - 1
    single = np.sum(spins.mean(0) ** 2) * len(spins)
    pairs = spins.T @ spins / np.sqrt(len(spins))
    upper = pairs[np.triu_indices(64, 1)]
    assert stats.chi2.sf(single, 64) > 1e-4
    assert stats.chi2.sf(np.sum(upper**2), len(upper)) > 1e-4


def test_uniforms_lie_inside_the_unit_interval_and_are_uniform() -> None:
    """Kolmogorov-Smirnov, false alarm rate 1e-4 each; the extreme words give neither 0 nor 1."""
    with double():
        u = np.asarray(random.uniforms(random.seed_key(13), (SIZE,)))
        coin, v = (np.asarray(a) for a in random.coins_and_uniforms(random.seed_key(13), (SIZE,), stream=1))
        ends = [float(random._unit(*(jnp.full((), w, jnp.uint32),) * 2)) for w in (0, 0xFFFFFFFF)]
    assert 0 < ends[0] < 1e-15 and 0 < 1 - ends[1] < 1e-15
    for sample in (u, v, v[coin], v[~coin]):
        assert stats.kstest(sample, "uniform").pvalue > 1e-4
    assert abs(coin.mean() - 0.5) < 4.5 * 0.5 / np.sqrt(SIZE)


def test_a_number_depends_on_its_key_and_place_alone() -> None:
    with double():
        key = random.seed_key(5)
        long, short = random.uniforms(key, (8, 100)), random.uniforms(key, (4, 100))
        together = random.child(key, jnp.arange(5, dtype=jnp.uint32))
        assert np.array_equal(long[:4], short)
        assert np.array_equal(together[3], random.child(key, 3))
        assert len({tuple(map(int, k)) for k in np.asarray(together)}) == 5
        assert jax.config.jax_enable_x64
    assert not jax.config.jax_enable_x64


def test_seeds_of_any_size_and_sign_are_accepted() -> None:
    with double():
        keys = {tuple(map(int, random.seed_key(s))) for s in (0, 1, -1, 2**32, 2**63, 2**32 + 1)}
    assert len(keys) == 6
