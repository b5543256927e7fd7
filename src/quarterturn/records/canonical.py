"""The canonical form of a record, and its name.

RFC 8785 (JSON Canonicalization Scheme) fixes order of keys, spelling of numbers and escapes, so that a record that
has been through JavaScript, Python or a database keeps its SHA-256, which is its name.
"""

import hashlib
from collections.abc import Mapping
from typing import Any

import rfc8785

from quarterturn.errors import RecordError

SHORT_NAME = 12  # letters that are shown; 48 bits


def canonical_json(record: Mapping[str, Any]) -> bytes:
    """`record` in canonical JSON, UTF-8.

    Raises
    ------
    RecordError
        A value that JSON can't hold: a number that is not finite, an integer beyond 2^53 - 1, a key that is no
        string, text that is not Unicode.
    """
    try:
        return rfc8785.dumps(record)
    except (ValueError, RecursionError) as reason:
        raise RecordError(f"the record has no canonical form: {reason}") from None


def record_name(record: Mapping[str, Any]) -> str:
    """SHA-256 of the canonical form, 64 hexadecimal letters. Raises RecordError as `canonical_json` does."""
    return hashlib.sha256(canonical_json(record)).hexdigest()


def short_name(name: str) -> str:
    """The first letters of a record's name, as they are shown to people."""
    return name[:SHORT_NAME]
