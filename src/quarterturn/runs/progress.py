"""What a run tells while it runs: how far it is and what it has so far."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass


@dataclass(frozen=True)
class Progress:
    """A snapshot. `rows` are (label, printed value, share of the target reached or None)."""

    stage: str  # compiling | warming up | drawing
    seconds: float
    draws: int  # per chain
    chains: int
    rows: tuple[tuple[str, str, float | None], ...] = ()
    remaining: float | None = None  # predicted seconds to the target, where there is one

    def __str__(self) -> str:
        head = f"{self.stage}, {self.seconds:.0f} s"
        if self.draws:
            head += f", {self.draws} draws of {self.chains} chains"
        if self.remaining is not None:
            head += f", about {self.remaining:.0f} s to go"
        return "; ".join([head, *(f"{label} = {value}" for label, value, _ in self.rows)])


Watcher = Callable[[Progress], None]
