"""What front end and evaluator send each other: a length, then JSON."""

from __future__ import annotations

import json
import os
import struct
from typing import Any

HEADER = struct.Struct("!I")


def encoded(frame: dict[str, Any]) -> bytes:
    """A frame as it is sent."""
    body = json.dumps(frame).encode()
    return HEADER.pack(len(body)) + body


def write_all(data: bytes, to: int) -> None:
    """Write all of it, however little the pipe takes at a time."""
    view = memoryview(data)
    while view:
        view = view[os.write(to, view):]


def read_exactly(source: int, n_bytes: int) -> bytes | None:
    """That many bytes; None when the stream ends first."""
    pieces = []
    while n_bytes:
        piece = os.read(source, min(n_bytes, 1 << 20))
        if not piece:
            return None
        pieces.append(piece)
        n_bytes -= len(piece)
    return b"".join(pieces)


def receive(source: int) -> dict[str, Any] | None:
    """Read one frame; None at the end of the stream."""
    head = read_exactly(source, HEADER.size)
    body = None if head is None else read_exactly(source, HEADER.unpack(head)[0])
    return None if body is None else json.loads(body)
