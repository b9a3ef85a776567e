"""A fingerprint of a room or a set-up: a hash of what was read, whatever the files looked like.

Comments, blanks, the order of keys, file names and folders leave it alone; any value changes it. Meshes and contours
count with every vertex.
"""

import hashlib
from collections.abc import Iterator
from dataclasses import fields, is_dataclass
from enum import Enum
from typing import Final

import numpy as np

from geometry.machine import Room
from geometry.setup import Setup

_SHORT: Final = 16


def fingerprint(subject: Room | Setup) -> str:
    """Return the SHA-256 hash, 64 hexadecimal digits, of a room, or of a set-up with its room."""
    digest = hashlib.sha256()
    for chunk in _chunks(subject):
        digest.update(chunk)
    return digest.hexdigest()


def short_fingerprint(subject: Room | Setup) -> str:
    """Return the first 16 digits of the fingerprint, for print."""
    return fingerprint(subject)[:_SHORT]


def _chunks(value: object) -> Iterator[bytes]:
    """Yield bytes that tell any two contents apart: every value goes with its kind and its length."""
    if is_dataclass(value):
        stated = [field.name for field in fields(value) if field.init]
        yield f"{type(value).__name__}({len(stated)}:".encode()
        for name in sorted(stated):
            yield f"{name}=".encode()
            yield from _chunks(getattr(value, name))
    elif isinstance(value, np.ndarray):
        yield from _array_chunks(value)
    elif isinstance(value, tuple | list):
        yield f"list({len(value)}:".encode()
        for item in value:
            yield from _chunks(item)
    elif isinstance(value, frozenset):
        yield from _chunks(sorted(str(item) for item in value))
    else:
        yield _plain(value)


def _array_chunks(array: np.ndarray) -> Iterator[bytes]:
    """Yield an array's shape and values: floats or whole numbers of 64 bits, little end first, on every machine."""
    kind = "<f8" if array.dtype.kind == "f" else "<i8"
    # Adding 0 turns -0.0 into 0.0.
    content = np.ascontiguousarray(array, dtype=kind) + np.zeros((), dtype=kind)
    yield f"array{array.shape}{kind}:".encode()
    yield content.tobytes()


def _plain(value: object) -> bytes:
    if isinstance(value, Enum):
        value = value.value
    if isinstance(value, str):
        text = value.encode()
        return b"text(%d:" % len(text) + text
    if isinstance(value, float):
        return f"number {(value + 0.0).hex()};".encode()
    if value is None or isinstance(value, bool | int):
        return f"{type(value).__name__} {value};".encode()
    raise TypeError(f"a {type(value).__name__} has no place in a fingerprint")
