"""Processes of this machine that do one task after another; they end at once, and a lost one is known by its task.

The pool of the standard library finishes what is begun when it is interrupted, and ends as a whole when one of its
processes dies, without saying over what; a process of its own for each connection does neither.
"""

import contextlib
import multiprocessing
import signal
from collections.abc import Callable, Iterator, Sequence
from multiprocessing.connection import Connection, wait
from multiprocessing.context import SpawnContext
from typing import Any, Generic, TypeVar

Task = TypeVar("Task")
Made = TypeVar("Made")


def each(
    make: Callable[[Task], Made], tasks: Sequence[Task], lost: Callable[[Task, str], Made], count: int
) -> Iterator[Made]:
    """Do something with every task in `count` processes.

    Parameters
    ----------
    make : callable
        A function of a module (or a `functools.partial` of one); what it takes and returns can be pickled.
    tasks : sequence
    lost : callable
        Gives the result of a task that raised, or whose process ended over it, from the task and what happened.
    count : int
        Processes, at least 1.

    Yields
    ------
    Made
        One result a task, in the order of the tasks.
    """
    # A fork would carry over a screen's threads and locks; a fresh interpreter takes nothing along.
    context = multiprocessing.get_context("spawn")
    crew: list[_Hand[Task]] = []
    try:
        crew += [_Hand(context, make) for _ in range(min(count, len(tasks)))]
        yield from _done(crew, tasks, lost, lambda: _Hand(context, make))
    finally:
        for hand in crew:
            hand.process.kill()
        for hand in crew:
            hand.process.join()
            hand.pipe.close()


def _done(
    crew: "list[_Hand[Task]]",
    tasks: Sequence[Task],
    lost: Callable[[Task, str], Made],
    another: "Callable[[], _Hand[Task]]",
) -> Iterator[Made]:
    """Hand out the tasks and yield the results in their order; a hand that is lost is replaced."""
    ahead = iter(enumerate(tasks))
    found: dict[int, Made] = {}
    for hand in crew:
        hand.give(next(ahead))
    for due in range(len(tasks)):
        while due not in found:
            ready = wait([one.pipe for one in crew if one.task is not None])
            for place, hand in enumerate(crew):
                if hand.pipe not in ready or hand.task is None:
                    continue
                number, task = hand.task
                worked, said = hand.taken()
                found[number] = said if worked else lost(task, said)
                following = next(ahead, None)
                if following is not None and not hand.usable:
                    crew[place] = another()
                crew[place].give(following)
        yield found.pop(due)


class _Hand(Generic[Task]):
    """One process, and what it works on."""

    def __init__(self, context: SpawnContext, make: Callable[[Task], Any]) -> None:
        self.pipe, theirs = context.Pipe()
        self.process = context.Process(target=_serve, args=(theirs,), daemon=True)
        self.task: tuple[int, Task] | None = None
        self.usable = True
        with _interrupts_held():
            self.process.start()
        theirs.close()
        self._make = make
        self._told = False

    def give(self, task: tuple[int, Task] | None) -> None:
        """Hand over a task; None leaves the process without work."""
        self.task = task
        if task is None:
            return
        with contextlib.suppress(OSError):  # it is gone: that shows when its answer is taken
            if not self._told:
                self.pipe.send(self._make)
                self._told = True
            self.pipe.send(task[1])

    def taken(self) -> tuple[bool, Any]:
        """Return the answer: whether the task was done, and its result or what happened."""
        try:
            answer: tuple[bool, Any] = self.pipe.recv()
        except (EOFError, OSError):
            self.usable = False
            self.process.join()
            self.pipe.close()
            return False, f"the process that worked on it ended with {self.process.exitcode}"
        return answer


def _serve(pipe: Connection) -> None:
    """Do what is asked for until nobody asks any more; an interrupt of the terminal is for the process that asks."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    with contextlib.suppress(EOFError, OSError):
        make = pipe.recv()
        while True:
            task = pipe.recv()
            try:
                answer = True, make(task)
            except Exception as error:  # noqa: BLE001 - whatever happens over a task belongs to that task
                answer = False, f"{type(error).__name__}: {error}"
            pipe.send(answer)


@contextlib.contextmanager
def _interrupts_held() -> Iterator[None]:
    """Hold interrupts back, for this thread and the process that it starts, where the system can."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)
