"""Which moves an action allows: found from the symbolic action, applied in order."""

from quarterturn.compiled.target import Target
from quarterturn.sampling.moves.base import Move
from quarterturn.sampling.moves.hamiltonian import HamiltonianMove
from quarterturn.sampling.moves.segment_flip import SegmentFlip
from quarterturn.sampling.moves.sign_flip import SignFlip
from quarterturn.sampling.moves.winding import WindingMove


def applicable_moves(target: Target) -> tuple[Move, ...]:
    """The moves of one sweep, the trajectory first."""
    moves: list[Move] = [HamiltonianMove(target)]
    if target.euclidean.symmetries:
        moves.append(SignFlip(target))
        if not target.angles:
            moves.append(SegmentFlip(target))
    if target.angles:
        moves.append(WindingMove(target))
    return tuple(moves)
