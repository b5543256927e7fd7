"""Baselines for one path: the C chains of path.c, and HMC in NumPy with many chains at once."""

from __future__ import annotations

import ctypes
import shutil
import subprocess
import tempfile
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
SOURCE = Path(__file__).parent / "path.c"
COMPILE = ("-Ofast", "-march=native", "-fPIC", "-c")
LINK = ("-shared",)  # without -Ofast: with it the library would switch off subnormal numbers in whoever loads it


@dataclass(frozen=True)
class PathProblem:
    """V = c2 q^2 + c4 q^4 on `sites` points `spacing` apart."""

    name: str
    sites: int
    spacing: float
    c2: float
    c4: float


class CompiledChains:
    """The C baselines, compiled where a compiler is found."""

    def __init__(self, compiler: str) -> None:
        with tempfile.TemporaryDirectory() as folder:
            library, part = Path(folder) / "path.so", Path(folder) / "path.o"
            for command in ((*COMPILE, "-o", part, SOURCE), (*LINK, "-o", library, part, "-lm")):
                subprocess.run([compiler, *map(str, command)], check=True, capture_output=True)
            self._library = ctypes.CDLL(str(library))
        pointer, number, real = ctypes.POINTER(ctypes.c_double), ctypes.c_long, ctypes.c_double
        word = ctypes.c_uint64
        self._library.metropolis.argtypes = [pointer, ctypes.c_int, real, real, real, real, number, word, pointer]
        self._library.hamiltonian.argtypes = [
            *(pointer, ctypes.c_int, real, real, real, real),
            *(ctypes.c_int, number, word, pointer),
        ]
        self._library.metropolis.restype = self._library.hamiltonian.restype = real

    def metropolis(self, problem: PathProblem, q: Floats, width: float, draws: int, seed: int) -> tuple[Floats, float]:
        """(mean q, mean q^2) of each sweep, (draws, 2), and the acceptance; `q` is carried on in place."""
        series = np.empty((draws, 2))
        rate = self._library.metropolis(*_arguments(problem, q), width, draws, seed, _pointer(series))
        return series, float(rate)

    def hamiltonian(
        self, problem: PathProblem, q: Floats, step: float, steps: int, draws: int, seed: int
    ) -> tuple[Floats, float]:
        """The same after each trajectory."""
        series = np.empty((draws, 2))
        rate = self._library.hamiltonian(*_arguments(problem, q), step, steps, draws, seed, _pointer(series))
        return series, float(rate)


def _arguments(problem: PathProblem, q: Floats) -> tuple[object, ...]:
    return (_pointer(q), problem.sites, problem.spacing, problem.c2, problem.c4)


def _pointer(array: Floats) -> ctypes._Pointer[ctypes.c_double]:
    return array.ctypes.data_as(ctypes.POINTER(ctypes.c_double))


def compiled_chains() -> CompiledChains | None:
    """The C baselines, or None where there is no compiler."""
    compiler = next((c for c in map(shutil.which, ("gcc", "clang", "cc")) if c), None)
    return CompiledChains(compiler) if compiler else None


def numpy_hamiltonian(
    problem: PathProblem, q: Floats, step: float, steps: int, draws: int, rng: np.random.Generator
) -> tuple[Floats, float]:
    """Leapfrog HMC in NumPy on q (chains, sites), in place; (draws, chains, 2) and the acceptance."""
    a = problem.spacing

    def force(x: Floats) -> Floats:
        hop = (2 * x - np.roll(x, 1, axis=1) - np.roll(x, -1, axis=1)) / a
        return hop + a * x * (2 * problem.c2 + 4 * problem.c4 * x * x)

    def energy(x: Floats, p: Floats) -> Floats:
        links = (np.roll(x, -1, axis=1) - x) ** 2 / (2 * a)
        return np.sum(links + a * x * x * (problem.c2 + problem.c4 * x * x) + p * p / 2, axis=1)

    series, accepted = np.empty((draws, len(q), 2)), 0.0
    for draw in range(draws):
        p = rng.standard_normal(q.shape)
        e = step * (1 + 0.2 * rng.uniform(-1, 1, (len(q), 1)))
        before, x = energy(q, p), q.copy()
        p -= 0.5 * e * force(x)
        for k in range(1, steps + 1):
            x += e * p
            p -= (e if k < steps else 0.5 * e) * force(x)
        accept = np.log(rng.random(len(q))) < before - energy(x, p)
        q[accept] = x[accept]
        accepted += accept.mean()
        series[draw] = np.stack([q.mean(axis=1), (q * q).mean(axis=1)], axis=-1)
    return series, accepted / draws
