"""Random numbers by counter, and what Markov moves draw from them.

The generator is threefry2x32 with 20 rounds, the one that JAX uses too, written out so that the compiler makes words,
logarithm and angle in one loop (about four times faster than drawing words first). A number depends on its key and
its place alone: the same seed gives the same numbers on any number of cores and however a run is cut into blocks.

Sources: Salmon, Moraes, Dror and Shaw, Parallel random numbers: as easy as 1, 2, 3, SC '11 (2011); normals by Box and
Muller, Ann. Math. Stat. 29 (1958) 610.
"""

from __future__ import annotations

import math

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.polynomials import COSINE, SINE, horner

ROTATIONS = ((13, 15, 26, 6), (17, 29, 16, 24))
PARITY = np.uint32(0x1BD11BDA)
CHILDREN = 0xFFFFFFFF  # second counter word of the keys made from keys; streams of numbers use small ones
AREA = tuple(1 / (2 * j + 1) for j in range(1, 11))  # of log m = 2 artanh s, |s| <= 3 - 2 sqrt 2
HALF_ROOT = np.int64(0x3FE6A09E667F3BCD)  # the bits of sqrt(1/2)


def threefry(key: Array, first: Array, second: Array) -> tuple[Array, Array]:
    """Two words of 32 bits for each pair of counter words; `key` has shape (2,), all are uint32."""
    keys = (key[0], key[1], key[0] ^ key[1] ^ PARITY)
    a, b = first + keys[0], second + keys[1]
    for group in range(5):
        for turn in ROTATIONS[group % 2]:
            a = a + b
            b = a ^ ((b << np.uint32(turn)) | (b >> np.uint32(32 - turn)))
        a = a + keys[(group + 1) % 3]
        b = b + keys[(group + 2) % 3] + np.uint32(group + 1)
    return a, b


def seed_key(seed: int, purpose: int = 0) -> NDArray[np.uint32]:
    """The key of a seed for one of several purposes, shape (2,); of a seed beyond 64 bits the low 64 count.

    Computed in NumPy, by the same rounds, so that nothing is compiled for it.
    """
    root = np.array([[seed & 0xFFFFFFFF], [(seed >> 32) & 0xFFFFFFFF]], dtype=np.uint32)
    found = threefry(root, np.array([purpose], np.uint32), np.array([CHILDREN], np.uint32))  # type: ignore[arg-type]
    return np.concatenate([np.asarray(word) for word in found])


def child(key: Array, number: Array | int) -> Array:
    """The key of the `number`-th child, shape (2,); of an array of numbers (n,) the keys (n, 2)."""
    numbers = jnp.asarray(number, jnp.uint32)
    return jnp.stack(threefry(key, numbers, jnp.full_like(numbers, CHILDREN)), axis=-1)


def words(key: Array, shape: tuple[int, ...], stream: int = 0) -> tuple[Array, Array]:
    """Two arrays of independent 32-bit words."""
    place = jnp.arange(math.prod(shape), dtype=jnp.uint32).reshape(shape)
    return threefry(key, place, jnp.full((), stream, jnp.uint32))


def _unit(high: Array, low: Array) -> Array:
    """The middle of one of 2^52 equal cells of (0, 1), from two words. With 53 bits the last one would round to 1."""
    cell = (high >> np.uint32(6)).astype(jnp.float64) * 2.0**26 + (low >> np.uint32(6)).astype(jnp.float64)
    return (cell + 0.5) * 2.0**-52


def uniforms(key: Array, shape: tuple[int, ...], stream: int = 0) -> Array:
    """Uniform in (0, 1), never an end, to 52 bits."""
    return _unit(*words(key, shape, stream))


def coins_and_uniforms(key: Array, shape: tuple[int, ...], stream: int = 0) -> tuple[Array, Array]:
    """A fair coin and an independent uniform at each place: the lowest bit is not in the uniform."""
    high, low = words(key, shape, stream)
    return (low & np.uint32(1)) == 1, _unit(high, low)


def complex_normals(key: Array, shape: tuple[int, ...], stream: int = 0) -> Array:
    """z = x + iy with x and y standard normal and independent, complex128.

    The radius has 40 bits, so |z| <= 7.6 (beyond which lie 5e-13 of all pairs), the angle 24 bits: equidistant
    angles give every moment below the order 2^24 exactly.
    """
    high, low = words(key, shape, stream)
    share = (high.astype(jnp.float64) * 2.0**8 + (low >> np.uint32(24)).astype(jnp.float64) + 0.5) * 2.0**-40
    sine, cosine = turn_sine_cosine((low << np.uint32(8)) | np.uint32(0x80))
    radius = jnp.sqrt(-2 * log(share))
    return jax.lax.complex(radius * cosine, radius * sine)


def log(x: Array) -> Array:
    """log x of positive normal doubles, to two units in the last place; several times faster than XLA's."""
    bits = jax.lax.bitcast_convert_type(x, jnp.int64)
    exponent = (bits - HALF_ROOT) >> np.int64(52)
    mantissa = jax.lax.bitcast_convert_type(bits - (exponent << np.int64(52)), jnp.float64)
    s = (mantissa - 1) / (mantissa + 1)
    return exponent.astype(jnp.float64) * math.log(2.0) + 2 * s * (1 + s * s * horner(AREA, s * s))


def turn_sine_cosine(turn: Array) -> tuple[Array, Array]:
    """sin and cos of 2 pi turn / 2^32 for uint32 `turn`, absolute error below 1e-15."""
    quarter = (turn + np.uint32(1 << 29)) >> np.uint32(30)
    rest = (turn - (quarter << np.uint32(30))).astype(jnp.int32).astype(jnp.float64) * (2 * math.pi / 2**32)
    sine, cosine = rest * horner(SINE, rest * rest), horner(COSINE, rest * rest)
    swapped = (quarter & np.uint32(1)) == 1
    s, c = jnp.where(swapped, cosine, sine), jnp.where(swapped, sine, cosine)
    return jnp.where(quarter >= 2, -s, s), jnp.where((quarter == 1) | (quarter == 2), -c, c)
