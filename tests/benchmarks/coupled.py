"""Twenty levels of two and of three coupled paths against the sparse eigensolver, side by side."""

from __future__ import annotations

import time

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
SETUPS = {2: (64, 4.6, "20x"), 3: (22, 4.2, "80x")}  # points a path and reach of the grid of second differences; goal


def potential(q: Floats) -> Floats:
    """Oscillators with quartic terms in a ring of springs."""
    ahead = np.roll(q, -1, axis=0)
    return np.asarray((q**2 / 2 + 0.5 * q**4 + 0.25 * (ahead - q) ** 2).sum(axis=0))


def coupled_levels(rounds: int = 5) -> None:
    """Print the ratio of times, and what each of the two gets wrong."""
    try:
        from quarterturn.imaginary.coupled import CoupledPaths
        from quarterturn.imaginary.coupled_levels import coupled_levels as solve
    except ImportError as reason:
        print(f"\nlevels of coupled paths: left out ({reason})")
        return
    from scipy.sparse import diags, eye_array, kron
    from scipy.sparse.linalg import eigsh

    for size, (points, reach, goal) in SETUPS.items():
        nothing = (None,) * size
        problem = CoupledPaths(np.eye(size), potential, nothing, (0.0,) * size, nothing)
        ticks, step = np.linspace(-reach, reach, points, retstep=True)
        second = diags([-0.5, 1.0, -0.5], [-1, 0, 1], (points, points)) / step**2
        v = potential(np.stack(np.meshgrid(*[ticks] * size, indexing="ij")))
        matrix = diags(v.ravel())
        for i in range(size):
            left, right = eye_array(points**i), eye_array(points ** (size - 1 - i))
            matrix = matrix + kron(kron(left, second), right)
        matrix = matrix.tocsc()
        mine, theirs = [], []
        for _ in range(rounds):
            began = time.perf_counter()
            found = solve(problem, 20)
            middle = time.perf_counter()
            values = np.sort(eigsh(matrix, 20, sigma=0.0, return_eigenvectors=False))
            mine.append(middle - began)
            theirs.append(time.perf_counter() - middle)
        print(
            f"\n20 levels of {size} coupled paths: {1e3 * np.median(mine):.1f} ms with error estimates, the largest "
            f"{np.max(found.errors):.1g}; sparse eigensolver on {' x '.join([str(points)] * size)} points "
            f"{1e3 * np.median(theirs):.0f} ms, off by {np.max(np.abs(values - found.energies)):.1g}: "
            f"{np.median(np.array(theirs) / np.array(mine)):.2g}x   goal {goal}"
        )
