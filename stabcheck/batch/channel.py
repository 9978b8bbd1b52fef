"""Messages over a pipe, so that neither side can be blocked for good by a partner that died in the middle of one.

A frame is its length as 8 bytes and a pickle. Both ends are processes of one run; nothing of this is ever stored.
"""

import os
import pickle
import struct
import threading
from collections.abc import Iterator
from typing import Any

from stabcheck.store.killpoints import here

_LENGTH = struct.Struct("<Q")
_PIECE = 1 << 18


def framed(message: Any) -> bytes:
    """Turn a message into a frame."""
    body = pickle.dumps(message, protocol=pickle.HIGHEST_PROTOCOL)
    return _LENGTH.pack(len(body)) + body


class OwnerEnd:
    """The owner's end: nothing blocks. What the pipe does not take waits here; what is incomplete too."""

    def __init__(self, fd: int) -> None:
        os.set_blocking(fd, False)
        self.fd = fd
        self.ended = False
        self._coming = bytearray()
        self._going = bytearray()

    @property
    def wants_to_write(self) -> bool:
        """Is something waiting to be sent?"""
        return bool(self._going) and not self.ended

    def send(self, message: Any) -> None:
        """Send now what the pipe takes, the rest when `flush` is called."""
        self._going += framed(message)
        self.flush()

    def flush(self) -> None:
        """Send what is waiting. A partner that is gone is noticed when reading."""
        try:
            while self._going:
                del self._going[: os.write(self.fd, memoryview(self._going)[:_PIECE].tobytes())]
        except BlockingIOError:
            return
        except (BrokenPipeError, ConnectionResetError):
            self._going.clear()

    def receive(self) -> list[Any]:
        """Give the complete messages that are there; sets ``ended`` when no more can come."""
        try:
            while piece := os.read(self.fd, _PIECE):
                self._coming += piece
            self.ended = True
        except BlockingIOError:
            pass
        except ConnectionResetError:
            self.ended = True
        return list(self._complete())

    def _complete(self) -> Iterator[Any]:
        at = 0
        while len(self._coming) - at >= _LENGTH.size:
            (length,) = _LENGTH.unpack_from(self._coming, at)
            stop = at + _LENGTH.size + length
            if len(self._coming) < stop:
                break
            yield pickle.loads(bytes(self._coming[at + _LENGTH.size : stop]))
            at = stop
        del self._coming[:at]


class WorkerEnd:
    """A worker's end: sending blocks until the owner has read, receiving until it has written."""

    def __init__(self, fd: int) -> None:
        self._fd = fd
        self._sending = threading.Lock()

    def send(self, message: Any) -> None:
        """Send one message, whichever thread asks.

        Raises
        ------
        OSError
            If the owner is gone.
        """
        frame = framed(message)
        half = len(frame) // 2
        with self._sending:
            self._write(frame[:half])
            here("half-sent message")
            self._write(frame[half:])

    def _write(self, data: bytes) -> None:
        left = memoryview(data)
        while left:
            left = left[os.write(self._fd, left) :]

    def receive(self) -> Iterator[Any]:
        """Give messages until the owner is gone."""
        while header := self._read(_LENGTH.size):
            body = self._read(_LENGTH.unpack(header)[0])
            if not body:
                return
            yield pickle.loads(body)

    def _read(self, length: int) -> bytes:
        data = bytearray()
        while len(data) < length:
            try:
                piece = os.read(self._fd, length - len(data))
            except ConnectionResetError:
                return b""
            if not piece:
                return b""
            data += piece
        return bytes(data)
