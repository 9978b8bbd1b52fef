"""The ``rebound`` engine: one draw at a time with WHFast, TRACE or IAS15, watched at every step by compiled code."""

from collections.abc import Iterable, Iterator

from stabcheck.outcome import Message
from stabcheck.plan import Plan, Task


class ReboundEngine:
    """Follow draws one after the other; signs the contract of ``engines.base``.

    The kernels are compiled at the first draw on a machine; after that they come from a cache.
    """

    def __init__(self) -> None:
        from stabcheck.engines.rebound.library import check_layout

        check_layout()

    def prepare(self) -> None:
        """Have the kernels compiled, or fetched from the cache, by following a planet for some orbits."""
        from stabcheck.engines.rebound.setting import one_planet

        for _ in self.follow([one_planet()], Plan(samples=16)):
            pass

    def follow(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message]:
        """Follow tasks in the order they come, each to its end."""
        from stabcheck.engines.rebound.follow import follow_draw

        for task in tasks:
            yield from follow_draw(task, plan)
