"""Double precision for our own calls only; the user's JAX settings stay as they are."""

from contextlib import AbstractContextManager

import jax


def double() -> AbstractContextManager[None]:
    """A context in which JAX traces and runs in double precision, on this thread only."""
    return jax.enable_x64(True)
