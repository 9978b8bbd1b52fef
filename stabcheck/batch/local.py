"""Workers on this machine, under supervision: a dead one is replaced, a stuck one is ended, and no draw is lost.

One pipe a worker and no shared queue: a queue whose writer is killed stays locked for everybody.
"""

import selectors
import time
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence

from stabcheck.batch import processes
from stabcheck.batch.base import REBOUND, Log, Pulse, never, no_log
from stabcheck.batch.handle import Worker
from stabcheck.errors import WorkerError
from stabcheck.outcome import Finished, Message, Outcome, Survival, Trust
from stabcheck.plan import Plan, Task

TICK_S = 0.2
PULSE_EVERY_S = 1.0
PREFETCH_S = 0.5
"""A worker has tasks for about this long in stock: fewer, and it waits; more, and others wait at the end of the run."""
MOST_PREFETCHED = 64
STOP_WITHIN_S = 5.0
DEATHS_BEFORE_READY = 2
DEATHS_IN_A_ROW = 20
"""Deaths without any draw finished in between, tasks that ran alone not counted: then it is not the draws' fault."""
TWICE = "process died on it, and again when it ran alone"


class LocalWorkers:
    """Carry out tasks in ``count`` processes.

    Parameters
    ----------
    count : int
        How many; the rows do not depend on it.
    engines : sequence of str
        By name, ``module:Class``; what one gives up goes on in the next.
    log : callable
        Takes deaths, retries and stops as an event and a text.
    stop : callable
        Asked several times a second; True ends the run in order, with checkpoints of what is in flight.
    hang_after_s : float, optional
        A worker with tasks that sends nothing for so long is stuck. If not given, ten times the spacing of
        checkpoints, but not less than ten minutes.
    """

    def __init__(
        self,
        count: int,
        *,
        engines: Sequence[str] = (REBOUND,),
        log: Log = no_log,
        stop: Callable[[], bool] = never,
        hang_after_s: float | None = None,
    ) -> None:
        if count < 1:
            raise WorkerError(f"{count} workers were asked for", why="at least one is needed", do="give 1 or more")
        self.count, self._engines, self._log, self._stop = count, tuple(engines), log, stop
        self._hang_after_s = hang_after_s

    def run(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message | Pulse]:
        """Carry out tasks, giving messages as they arise.

        Raises
        ------
        WorkerError
            If the workers cannot be started or keep dying; what came out before is good.
        """
        processes.refuse_while_importing_main()
        processes.refuse_main_without_file()
        hang_after_s = self._hang_after_s or max(600.0, 10.0 * plan.checkpoint_every_s)
        supervisor = _Supervisor(tasks, plan, self.count, self._engines, self._log, hang_after_s)
        try:
            while supervisor.more_to_do():
                if self._stop():
                    yield from supervisor.stopped()
                    return
                yield from supervisor.turn()
        finally:
            supervisor.end_all()


class _Supervisor:
    """The state of one run of the workers; one turn of its loop is `turn`."""

    def __init__(
        self,
        tasks: Iterable[Task],
        plan: Plan,
        count: int,
        engines: Sequence[str],
        log: Log,
        hang_after_s: float,
    ) -> None:
        self._source = iter(tasks)
        self._source_is_empty = False
        self._waiting: deque[Task] = deque()
        self._suspects: deque[Task] = deque()
        self._plan, self._count, self._engines, self._log = plan, count, engines, log
        self._hang_after_s = hang_after_s
        self._workers: dict[int, Worker] = {}
        self._selector = selectors.DefaultSelector()
        self._started = 0
        self._ever_ready = False
        self._deaths_before_ready = 0
        self._deaths_in_a_row = 0
        self._pulse_at = self._turn_at = time.monotonic()

    # -- tasks

    def _look_ahead(self, count: int) -> None:
        """Have ``count`` tasks waiting, if there are so many."""
        while not self._source_is_empty and len(self._waiting) < count:
            task = next(self._source, None)
            if task is None:
                self._source_is_empty = True
            else:
                self._waiting.append(task)

    def _taken(self, most: int) -> list[Task]:
        self._look_ahead(most)
        return [self._waiting.popleft() for _ in range(min(most, len(self._waiting)))]

    def _stock(self, worker: Worker) -> int:
        """How many tasks a worker should have that it has not begun.

        Ever fewer when the end is in sight, so that no worker has a stock while another one waits.
        """
        stock = min(MOST_PREFETCHED, int(PREFETCH_S * worker.rate_per_s()))
        self._look_ahead(self._count * stock)
        return min(stock, len(self._waiting) // (2 * self._count)) if self._source_is_empty else stock

    def more_to_do(self) -> bool:
        """Is any task left that has neither finished nor been given up?"""
        if any(worker.outstanding for worker in self._workers.values()) or self._suspects:
            return True
        self._look_ahead(1)
        return bool(self._waiting)

    def _supply(self, worker: Worker) -> None:
        """Give a worker what it needs, if there is anything it may have."""
        if not worker.ready or worker.alone:
            return
        stock = self._stock(worker)
        if worker.wanting:
            tasks = self._taken(max(1, stock))
            if tasks:
                worker.give(tasks)
            elif self._suspects:
                worker.give([self._suspects.popleft()], alone=True)
        elif worker.queued < stock // 2 and (tasks := self._taken(stock - worker.queued)):
            worker.give(tasks)

    def _answer(self, worker: Worker) -> None:
        """A worker has nothing that it has not begun."""
        if not worker.outstanding:
            worker.alone, worker.wanting = False, True
            return
        # An engine that follows several draws at once wants one more beside those in flight.
        tasks = [] if worker.alone else self._taken(max(1, self._stock(worker)))
        if tasks:
            worker.give(tasks)
        else:
            worker.no_more()

    # -- one turn

    def turn(self) -> Iterator[Message | Pulse]:
        """Start what is missing, wait a moment, and deal with what came."""
        self._hire()
        for worker in self._workers.values():
            self._supply(worker)
            self._watch_writing(worker)
        for key, events in self._selector.select(TICK_S):
            worker = self._workers[key.fd]
            if events & selectors.EVENT_WRITE:
                worker.channel.flush()
            if events & selectors.EVENT_READ:
                yield from self._hear(worker)
        self._look_for_stuck()
        now = time.monotonic()
        if now - self._pulse_at >= PULSE_EVERY_S:
            self._pulse_at = now
            for worker in self._workers.values():
                worker.trim_stderr()
            yield Pulse(sum(worker.ready for worker in self._workers.values()))

    def _hire(self) -> None:
        # The first one alone: it compiles the kernels, and the others find them compiled.
        wanted = self._count if self._ever_ready else 1
        while len(self._workers) < wanted:
            self._started += 1
            worker = Worker(f"worker {self._started}", self._engines, self._plan)
            self._workers[worker.channel.fd] = worker
            self._selector.register(worker.channel.fd, selectors.EVENT_READ)

    def _watch_writing(self, worker: Worker) -> None:
        events = selectors.EVENT_READ | (selectors.EVENT_WRITE if worker.channel.wants_to_write else 0)
        if self._selector.get_key(worker.channel.fd).events != events:
            self._selector.modify(worker.channel.fd, events)

    def _hear(self, worker: Worker) -> Iterator[Message | Pulse]:
        for message in worker.receive():
            yield from self._understood(worker, message)
        if worker.channel.ended:
            yield from self._buried(worker)

    def _understood(self, worker: Worker, message: tuple[object, ...]) -> Iterator[Message | Pulse]:
        match message:
            case ("ready", _):
                worker.ready, worker.ready_at = True, time.monotonic()
                self._ever_ready, self._deaths_before_ready = True, 0
                yield Pulse(sum(each.ready for each in self._workers.values()))
            case ("messages", list() as results, wants_more):
                for result in results:
                    if worker.note(result):
                        if isinstance(result, Finished):
                            self._deaths_in_a_row = 0
                        yield result
                    else:
                        self._log("not asked for", f"{worker.name} sent a result of a draw that it was not given")
                if wants_more:
                    self._answer(worker)
            case ("failed", str() as text):
                worker.failure = text
                self._log("engine failed", f"{worker.name}: {text}")
            case _:
                raise WorkerError(f"{worker.name} sent what nobody understands: {message!r}")

    # -- deaths

    def _buried(self, worker: Worker) -> Iterator[Message | Pulse]:
        """Deal with a worker that has died; whatever it had sent completely counts."""
        worker.process.kill()  # in case only its pipe is closed
        worker.process.join()
        text = worker.failure or worker.stderr_text()
        begun, unbegun = worker.in_flight_and_not()
        how = f"{worker.name} (process {worker.process.pid}) ended with {worker.process.exitcode}"
        self._log("worker died", f"{how}; draws in flight: {[t.number for t in begun]}; its last words: {text or '-'}")
        self._dismiss(worker)
        self._waiting.extendleft(reversed(unbegun))
        if not worker.ready:
            self._give_up_before_ready(text)
        elif worker.alone and begun:
            for task in begun:
                self._log("draw given up", f"draw {task.number}: {TWICE}")
                yield Finished(_died_on(task, self._plan))
        else:
            self._suspects.extend(begun)
            self._count_death(how, text)

    def _give_up_before_ready(self, text: str) -> None:
        self._deaths_before_ready += 1
        guard = processes.missing_guard()
        if guard.what in text:
            raise guard
        if self._deaths_before_ready >= DEATHS_BEFORE_READY:
            raise WorkerError(
                "the workers die before they can begin",
                where=f"{self._deaths_before_ready} workers, one after the other",
                why=_gist(text) or "they said nothing; a process killed from outside (memory?) looks like that",
                do="what is stored is safe; mend what they say and give the same command again",
            )

    def _count_death(self, how: str, text: str) -> None:
        self._deaths_in_a_row += 1
        if self._deaths_in_a_row >= DEATHS_IN_A_ROW:
            raise WorkerError(
                f"{DEATHS_IN_A_ROW} workers died one after the other without finishing a draw",
                where=how,
                why=_gist(text) or "they said nothing; a process killed from outside (memory?) looks like that",
                do="what is stored is safe; look at the log in the run file, then give the same command again",
            )

    def _look_for_stuck(self) -> None:
        now = time.monotonic()
        if now - self._turn_at > 10.0:  # the owner itself was stopped or busy: nobody was listened to meanwhile
            for worker in self._workers.values():
                worker.heard_at = now
        self._turn_at = now
        for worker in list(self._workers.values()):
            if (worker.outstanding or not worker.ready) and now - worker.heard_at > self._hang_after_s:
                self._end_stuck(worker)

    def _end_stuck(self, worker: Worker) -> None:
        begun, unbegun = worker.in_flight_and_not()
        silent = f"{worker.name} has sent nothing for {self._hang_after_s:g} s and was ended"
        self._dismiss(worker)
        self._waiting.extendleft(reversed(unbegun))
        if not worker.ready:
            self._log("worker stuck", silent)
            self._give_up_before_ready(silent)
        elif len(begun) > 1:  # any one of them may be the reason
            self._suspects.extend(begun)
            self._log("worker stuck", f"{silent}; to be tried one by one: {[task.number for task in begun]}")
        else:
            self._log("worker stuck", f"{silent}; not finished, tried again on resume: {[t.number for t in begun]}")

    def _dismiss(self, worker: Worker) -> None:
        del self._workers[worker.channel.fd]
        self._selector.unregister(worker.channel.fd)
        worker.end()

    # -- the end

    def stopped(self) -> Iterator[Message | Pulse]:
        """End in order: no more tasks, and within seconds what the workers hold of those in flight."""
        deadline = time.monotonic() + STOP_WITHIN_S
        for worker in list(self._workers.values()):
            if worker.ready:
                worker.ask_to_stop()
            else:
                self._dismiss(worker)
        while self._workers and (left := deadline - time.monotonic()) > 0:
            for worker in self._workers.values():
                self._watch_writing(worker)
            for key, _ in self._selector.select(left):
                yield from self._last_words(self._workers[key.fd])
        if self._workers:
            self._log("stop", f"{len(self._workers)} workers did not end within {STOP_WITHIN_S:g} s and were ended")

    def _last_words(self, worker: Worker) -> Iterator[Message]:
        worker.channel.flush()
        for message in worker.receive():
            if message[0] == "messages":
                yield from (each for each in message[1] if worker.note(each))
        if worker.channel.ended:
            self._dismiss(worker)

    def end_all(self) -> None:
        """End every worker, whatever it is doing. Nothing is lost but its time."""
        for worker in list(self._workers.values()):
            self._dismiss(worker)
        self._selector.close()


def _gist(text: str) -> str:
    """Take the exception out of a traceback: its last line that is not indented, and what follows."""
    lines = text.splitlines()
    begins = [k for k, line in enumerate(lines) if line[:1].strip()]
    return "\n".join(lines[begins[-1] :]) if begins else text


def _died_on(task: Task, plan: Plan) -> Outcome:
    """What a draw came to on which two processes died. Nothing of it depends on when or how."""
    return Outcome(
        number=task.number,
        survival=Survival.UNKNOWN,
        trust=Trust.PROCESS_DIED,
        time_d=0.0,  # no time of it can be vouched for
        span_d=task.span_d,
        method=str(plan.method),
        step_d=float("nan"),
        history=TWICE,
    )
