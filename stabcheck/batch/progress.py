"""How far a run is and when it ends, as a value; and a line on the terminal that shows it.

The end is estimated from the spans that are left, not from rows: broken draws end early, so that rows come fast at
first. Only this session's work counts, from the moment the first worker is ready.
"""

import sys
import time
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, TextIO

from stabcheck.outcome import Checkpoint, Finished, Message, Trust
from stabcheck.store import RunFile
from stabcheck.verdict import Verdict, verdict

PLAIN_LINE_EVERY_S = 60.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Status:
    """Where a run stands.

    Attributes
    ----------
    done, total : int
        Draws that have an outcome or are not orbits, of all that were asked for.
    rate_per_s : float
        Draws finished a second in this session; 0 before the first.
    left_s : float or None
        Estimate of the time left; None before there is anything to estimate it from.
    prefix : int
        So many draws from number 0 on are done without a gap; only these are counted in ``verdicts``, because broken
        draws finish first.
    verdicts : dict of Verdict to int
    refused : int
        Draws of the prefix that are not orbits.
    working : int
        Workers that are ready.
    ended : bool
    """

    done: int
    total: int
    rate_per_s: float
    left_s: float | None
    prefix: int
    verdicts: dict[Verdict, int]
    refused: int
    working: int
    ended: bool = False


Progress = Callable[[Status], None]


@dataclass(slots=True)
class Tally:
    """Counts the work of this session, in spans: 1 is a draw followed from its start to its span."""

    run: RunFile
    total: int
    clock: Callable[[], float] = time.monotonic
    _began: float | None = None
    _spans: float = 0.0
    _finished: int = 0
    _done_before: int = 0
    _reached: dict[int, float] = field(default_factory=dict)
    _prefix: int = 0
    _classes: Counter[Verdict] = field(default_factory=Counter)
    _shares: float = 0.0
    _working: int = 0

    def __post_init__(self) -> None:
        self._done_before = self.run.finished_count(self.total)
        self._reached = self.run.checkpoint_shares()

    def ready(self, working: int) -> None:
        """Note that so many workers are ready; the clock starts with the first."""
        self._working = working
        if working and self._began is None:
            self._began = self.clock()

    def add(self, message: Message) -> None:
        """Count what a message means in work."""
        if isinstance(message, Finished):
            outcome = message.outcome
            before = self._reached.pop(outcome.number, 0.0)
            self._finished += 1
            if outcome.trust is not Trust.PROCESS_DIED:
                self._spans += max(0.0, min(1.0, outcome.time_d / outcome.span_d) - before)
        elif isinstance(message, Checkpoint):
            # A draw that starts again with a smaller step falls back; what it did before was work, but is not progress.
            self._spans += max(0.0, message.steps_done - self._reached.get(message.number, 0.0))
            self._reached[message.number] = message.steps_done

    def status(self, ended: bool = False) -> Status:
        """Say where the run stands, from what is committed."""
        self._advance()
        refused = sum(self.run.refused(self.total).values())
        finished = self._done_before + self._finished
        elapsed = 0.0 if self._began is None else self.clock() - self._began
        return Status(
            done=finished + refused,
            total=self.total,
            rate_per_s=self._finished / elapsed if elapsed > 0.0 else 0.0,
            left_s=self._left_s(self.total - finished - refused, elapsed),
            prefix=self._prefix,
            verdicts={word: self._classes[word] for word in Verdict if self._classes[word]},
            refused=sum(self.run.refused(self._prefix).values()),
            working=self._working,
            ended=ended,
        )

    def _advance(self) -> None:
        prefix = min(self.total, self.run.prefix_done(self._prefix))
        for axes, (count, share) in self.run.classes(self._prefix, prefix).items():
            self._classes[verdict(*axes)] += count
            self._shares += share
        self._prefix = prefix

    def _left_s(self, draws_left: int, elapsed_s: float) -> float | None:
        if draws_left <= 0:
            return 0.0
        if self._spans <= 0.0 or elapsed_s <= 0.0:
            return None
        return spans_left(draws_left, list(self._reached.values()), self._mean_share()) / (self._spans / elapsed_s)

    def _mean_share(self) -> float:
        """How much of its span a draw needs, from the prefix; the whole of it while nothing is known."""
        counted = self._classes.total()
        return self._shares / counted if counted else 1.0


def spans_left(draws_left: int, reached: list[float], mean_share: float) -> float:
    """Estimate the work left: draws under way are taken to live to their span, the others to be like those done.

    Parameters
    ----------
    draws_left : int
        Not finished, with those under way.
    reached : list of float
        Shares of their spans that the draws under way have done.
    mean_share : float
        Share that a draw needs in the mean.
    """
    under_way = sum(1.0 - min(1.0, share) for share in reached)
    return under_way + max(0, draws_left - len(reached)) * mean_share


def clock_time(left_s: float, now_s: float) -> str:
    """Say when something ends that takes so long from now: ``05:40``, with the day unless it is today."""
    end, today = time.localtime(now_s + left_s), time.localtime(now_s)
    same_day = (end.tm_year, end.tm_yday) == (today.tm_year, today.tm_yday)
    return time.strftime("%H:%M" if same_day else "%a %H:%M" if left_s < 6 * 86_400 else "%d %b %H:%M", end)


def rate_text(rate_per_s: float) -> str:
    """Write a rate with the unit that gives a readable number."""
    for unit, seconds in (("s", 1.0), ("min", 60.0), ("h", 3600.0)):
        if rate_per_s * seconds >= 1.0 or unit == "h":
            return f"{rate_per_s * seconds:.3g}/{unit}"
    raise AssertionError("the last unit takes every rate")


def described(status: Status, now_s: float) -> str:
    """Write rate, end and verdicts in a few words."""
    if not status.working and not status.ended:
        return "starting the workers"
    parts = [rate_text(status.rate_per_s)] if status.rate_per_s else [] if status.ended else ["at work"]
    if status.ended:
        parts.append("ended")
    elif status.left_s is not None:
        parts.append(f"done about {clock_time(status.left_s, now_s)}")
    words = [f"{word} {count}" for word, count in status.verdicts.items()]
    words += [f"not an orbit {status.refused}"] if status.refused else []
    return "   ".join([*parts, f"first {status.prefix}: {', '.join(words) or '-'}" if status.prefix else ""]).strip()


class _Terminal:
    """A stream that may vanish in the middle of the night: from then on nothing is written, and nothing fails."""

    def __init__(self, stream: TextIO | None) -> None:
        self._stream = stream
        self.gone = "" if stream is not None else "there is none"  # as Python says it where the descriptor is closed

    def write(self, text: str) -> int:
        if self._stream is not None and not self.gone:
            try:
                return self._stream.write(text)
            except (OSError, ValueError) as problem:  # ValueError: it was closed
                self.gone = str(problem)
        return len(text)

    def flush(self) -> None:
        if self._stream is not None and not self.gone:
            try:
                self._stream.flush()
            except (OSError, ValueError) as problem:
                self.gone = str(problem)

    def isatty(self) -> bool:
        try:
            return self._stream is not None and not self.gone and self._stream.isatty()
        except (OSError, ValueError) as problem:
            self.gone = str(problem)
            return False

    def fileno(self) -> int:
        if self._stream is None:
            raise OSError(self.gone)
        return self._stream.fileno()


class ProgressLine:
    """Shows a run on standard error: one line that changes on a terminal, a plain line now and then elsewhere."""

    def __init__(self, stream: TextIO | None = None, plain_every_s: float = PLAIN_LINE_EVERY_S) -> None:
        self._terminal = _Terminal(sys.stderr if stream is None else stream)
        self._plain_every_s = plain_every_s
        self._plain_at = -plain_every_s
        self._bar: Any = None

    @property
    def gone(self) -> str:
        """Why nothing can be shown any more; empty while it can."""
        return self._terminal.gone

    def _new_bar(self, status: Status) -> Any:
        import tqdm

        tqdm.tqdm.monitor_interval = 0  # no thread of its own: whoever calls us does so every second
        shape = "{n_fmt}/{total_fmt} draws |{bar:20}| {desc}"
        bar = {
            "bar_format": shape,
            "file": self._terminal,
            "dynamic_ncols": True,
            "delay": 1e-9,
        }  # not before `refresh`
        return tqdm.tqdm(total=status.total, initial=status.done, **bar)

    def __call__(self, status: Status) -> None:
        """Show a status."""
        text = described(status, time.time())
        if self._terminal.isatty():
            self._bar = self._new_bar(status) if self._bar is None else self._bar
            self._bar.n = status.done
            self._bar.set_description_str(text, refresh=False)
            self._bar.refresh()
            if status.ended:
                self._bar.close()
            return
        now = time.monotonic()
        if status.ended or now - self._plain_at >= self._plain_every_s:
            self._plain_at = now
            self._terminal.write(f"{time.strftime('%H:%M:%S')}  {status.done}/{status.total} draws   {text}\n")
            self._terminal.flush()
