"""Symmetric splittings of the flow into exact rotations and kicks.

H = T + S_0 + S_int: the reference part S_0 with the kinetic term is a rotation of (x - x0, v) by an angle, S_int is a
kick. A splitting says in which fractions of a step they alternate, beginning and ending with a rotation. Every
symmetric splitting is reversible and preserves volume, so the Metropolis step makes it exact; a better one only
accepts more often.
"""

from dataclasses import dataclass

import numpy as np

from quarterturn.sampling.moves.base import TRAJECTORY_LIMIT


@dataclass(frozen=True, slots=True)
class Splitting:
    """Fractions of one step: len(rotations) = len(kicks) + 1, both palindromes, both summing to 1."""

    name: str
    rotations: tuple[float, ...]
    kicks: tuple[float, ...]

    def trajectory(self, step: float, steps: int) -> tuple[np.ndarray, np.ndarray, int]:
        """Angles and kick weights of `steps` steps of length `step` [rad], padded with zeros, and the kick count."""
        turns, kicks = [0.0], []
        for _ in range(steps):
            turns[-1] += step * self.rotations[0]
            for kick, turn in zip(self.kicks, self.rotations[1:], strict=True):
                kicks.append(step * kick)
                turns.append(step * turn)
        if len(kicks) > TRAJECTORY_LIMIT:
            raise ValueError(f"{len(kicks)} kicks, the limit is {TRAJECTORY_LIMIT}")
        padded_turns, padded_kicks = np.zeros(TRAJECTORY_LIMIT + 1), np.zeros(TRAJECTORY_LIMIT)
        padded_turns[: len(turns)] = turns
        padded_kicks[: len(kicks)] = kicks
        return padded_turns, padded_kicks, len(kicks)
