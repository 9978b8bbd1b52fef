"""What Ctrl-C, an ended session and a closed terminal do to a run: the first ends it in order, the second at once."""

import contextlib
import signal
import threading
from collections.abc import Callable, Iterator
from types import FrameType
from typing import Any

STOPS = (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)


class StopRequest:
    """Remembers that somebody asked for a stop, and by what."""

    def __init__(self) -> None:
        self.by = ""
        self._listening: tuple[signal.Signals, ...] = ()

    def __call__(self) -> bool:
        """Has somebody asked?"""
        self._listen()
        return bool(self.by)

    def _listen(self) -> None:
        # Again at every question: REBOUND, when it runs in this process, puts its own handler of SIGINT in place.
        for number in self._listening:
            signal.signal(number, self._asked)

    def _asked(self, number: int, _: FrameType | None) -> None:
        first, self.by = not self.by, signal.Signals(number).name
        if not first:
            raise KeyboardInterrupt(self.by)

    @contextlib.contextmanager
    def listening(self) -> Iterator["StopRequest"]:
        """Listen to the stop signals while inside; one that is ignored (``nohup``) stays ignored."""
        if threading.current_thread() is not threading.main_thread():  # only the main thread may; it decides then
            yield self
            return
        before = {number: signal.getsignal(number) for number in STOPS}
        self._listening = tuple(number for number, handler in before.items() if handler is not signal.SIG_IGN)
        self._listen()
        try:
            yield self
        finally:
            for number in self._listening:
                signal.signal(number, before[number] or _plain_handler(number))  # None: it was not Python's
            self._listening = ()


def _plain_handler(number: signal.Signals) -> Callable[[int, FrameType | None], Any] | signal.Handlers:
    return signal.default_int_handler if number is signal.SIGINT else signal.SIG_DFL
