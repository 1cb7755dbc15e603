"""Messages between the program and its gmsh child: pickles, each after its length in 8 bytes."""

from __future__ import annotations

import pickle
import struct
from typing import Any, BinaryIO

HEAD = struct.Struct("<Q")


def send(stream: BinaryIO, message: Any) -> None:
    """Write one message and flush."""
    data = pickle.dumps(message, protocol=5)
    stream.write(HEAD.pack(len(data)))
    stream.write(data)
    stream.flush()


def receive(stream: BinaryIO) -> Any:
    """Read one message.

    Raises
    ------
    EOFError
        The other side is gone.
    """
    (length,) = HEAD.unpack(_exactly(stream, HEAD.size))
    return pickle.loads(_exactly(stream, length))


def _exactly(stream: BinaryIO, length: int) -> bytes:
    chunks = []
    while length:
        chunk = stream.read(length)
        if not chunk:
            raise EOFError("the other side closed the stream")
        chunks.append(chunk)
        length -= len(chunk)
    return b"".join(chunks)
