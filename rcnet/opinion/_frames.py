"""Messages between rcnet and its simulator child: length first, then JSON text or one plain array."""

from __future__ import annotations

import io
import json
import struct
from typing import IO, Any

import numpy as np
import numpy.typing as npt

# More than a results file may hold is no honest message.
MAX_FRAME_BYTES = 2 * 1024**3

_LENGTH = struct.Struct("<Q")


def write_json(stream: IO[bytes], message: dict[str, Any]) -> None:
    """Send a JSON object. Raises OSError where the other side is gone."""
    _write(stream, json.dumps(message).encode("ascii"))


def read_json(stream: IO[bytes]) -> dict[str, Any]:
    """Receive a JSON object. Raises EOFError where the other side is gone, ValueError for anything else."""
    message = json.loads(_read(stream))
    if not isinstance(message, dict):
        raise ValueError("the message is no JSON object")
    return message


def write_array(stream: IO[bytes], array: npt.NDArray[Any]) -> None:
    """Send an array of numbers. Raises OSError where the other side is gone."""
    buffer = io.BytesIO()
    np.save(buffer, array, allow_pickle=False)
    _write(stream, buffer.getbuffer())


def read_array(stream: IO[bytes]) -> npt.NDArray[Any]:
    """Receive an array of numbers. Raises EOFError where the other side is gone, ValueError for all else."""
    array: npt.NDArray[Any] = np.load(io.BytesIO(_read(stream)), allow_pickle=False)
    return array


def _write(stream: IO[bytes], payload: bytes | memoryview) -> None:
    stream.write(_LENGTH.pack(len(payload)))
    stream.write(payload)
    stream.flush()


def _read(stream: IO[bytes]) -> bytes:
    (length,) = _LENGTH.unpack(_exactly(stream, _LENGTH.size))
    if length > MAX_FRAME_BYTES:
        raise ValueError(f"a message of {length} bytes was announced")
    return _exactly(stream, length)


def _exactly(stream: IO[bytes], length: int) -> bytes:
    data = stream.read(length)
    if len(data) < length:
        raise EOFError("the other side is gone")
    return data
