"""A second interpreter beside this one, for work that the other processor can do meanwhile.

It is started early, so that its own imports cost nothing that anybody waits for, is given functions by name with their
arguments, does them in order, and ends with this process. Whatever it does not deliver its caller does itself, so that
nothing depends on it. Only the standard library is imported here: a run starts it before anything else.
"""

from __future__ import annotations

import contextlib
import importlib
import os
import pickle
import queue
import signal
import subprocess
import sys
import threading
from collections.abc import Mapping
from concurrent.futures import Future
from dataclasses import dataclass, field
from typing import IO, Any, TypeVar

T = TypeVar("T")
_PROGRAM = "import sys; sys.path[:] = {path!r}; from sms_resource import second; second.serve()"
# Sums of threaded products depend on the number of threads, and results must not; the matrices here are small.
ONE_THREAD = {f"{name}_THREADS": "1" for name in ("OPENBLAS_NUM", "MKL_NUM", "BLIS_NUM", "VECLIB_MAXIMUM")}
# What a pipe to a process that ended, or what it sent last, may raise.
_BROKEN = (
    OSError, pickle.UnpicklingError, AttributeError, ImportError, IndexError, KeyError, TypeError, ValueError, EOFError,
    MemoryError, RecursionError,
)  # fmt: skip


class SecondLost(Exception):
    """The second interpreter has not done what it was asked for."""


class SecondInterpreter:
    """One child process and the thread that talks with it."""

    def __init__(self) -> None:
        self.owner = os.getpid()
        self.told: set[str] = set()  # what a caller need not tell it again
        self._child = subprocess.Popen(
            [sys.executable, "-c", _PROGRAM.format(path=sys.path)], env={**os.environ, **ONE_THREAD},
            stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL,
        )  # fmt: skip
        self._asked: queue.SimpleQueue[tuple[bytes, Future[Any]]] = queue.SimpleQueue()
        threading.Thread(target=self._talk, daemon=True).start()

    @property
    def alive(self) -> bool:
        """Whether it can be asked by this process."""
        return self.owner == os.getpid() and self._child.poll() is None

    def ask(self, task: str, *arguments: Any) -> Future[Any]:
        """Have ``module:function`` called with arguments as they are now; the future holds what it returned."""
        message = pickle.dumps((task, arguments), protocol=5)
        answer: Future[Any] = Future()
        self._asked.put((message, answer))
        return answer

    def stop(self) -> None:
        """Ask the child to end; it takes away what it has put on the disk."""
        self._child.terminate()

    def _talk(self) -> None:
        requests, replies = self._child.stdin, self._child.stdout
        assert requests is not None and replies is not None
        while True:
            message, answer = self._asked.get()
            try:
                requests.write(message)
                requests.flush()
                value = pickle.load(replies)  # what our own child wrote to a pipe that only we hold
            except _BROKEN as error:
                self._child.kill()  # what it might still send would be taken for another answer
                answer.set_exception(SecondLost(str(error)))
            else:
                answer.set_result(value)


_known: SecondInterpreter | None = None


def processors() -> int:
    """Processors that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def start() -> SecondInterpreter | None:
    """The second interpreter, started where it is not running; None where one would not help or cannot be had."""
    global _known
    if processors() < 2:
        return None
    if _known is None or not _known.alive:
        try:
            _known = SecondInterpreter()
        except OSError:
            return None
    return _known


def stop() -> None:
    """Ask the second interpreter to end, where there is one."""
    if _known is not None and _known.alive:
        _known.stop()


def ask(task: str, *arguments: Any) -> Future[Any] | None:
    """Ask the second interpreter; None where there is none, or the arguments cannot be sent."""
    other = start()
    if other is None:
        return None
    try:
        return other.ask(task, *arguments)
    except (pickle.PicklingError, TypeError, AttributeError):
        return None


def answer(asked: Future[T] | None) -> T | None:
    """What was asked for, waited for; None where the second interpreter did not deliver it."""
    if asked is None:
        return None
    try:
        return asked.result()
    except SecondLost:
        return None


@dataclass(frozen=True)
class Call:
    """A function by ``module:name``, with its arguments."""

    function: str
    arguments: tuple[Any, ...] = ()
    named: Mapping[str, Any] = field(default_factory=dict)

    def make(self) -> Any:
        """What the function returns; it is called here."""
        module, _, function = self.function.partition(":")
        return getattr(importlib.import_module(module), function)(*self.arguments, **self.named)


def perform(calls: Mapping[str, Call]) -> dict[str, Any]:
    """What each call returns, by its name; made here, one after another."""
    return {name: call.make() for name, call in calls.items()}


class Aside:
    """Calls that the second interpreter works on while this one does something else.

    Arguments that several calls share are sent once.
    """

    def __init__(self, calls: Mapping[str, Call]) -> None:
        self._calls = calls
        self._asked = ask(f"{__name__}:perform", calls)

    def results(self) -> dict[str, Any]:
        """What the calls returned; made here where the second interpreter has not made it, with the errors they raise."""
        found = answer(self._asked)
        return perform(self._calls) if found is None else found


def serve() -> None:
    """Do what is asked for until nobody asks any more (called in the second interpreter)."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the first one is asked whether to stop
    requests, replies = sys.stdin.buffer, os.fdopen(os.dup(1), "wb")
    os.dup2(os.open(os.devnull, os.O_WRONLY), 1)  # what a library prints is no reply
    signal.signal(signal.SIGTERM, lambda *_: sys.exit())
    with contextlib.suppress(SystemExit):
        while serve_one(requests, replies):
            pass
    for thread in threading.enumerate():
        if thread is not threading.current_thread():
            thread.join()  # it takes away what it has put on the disk
    os._exit(0)


def serve_one(requests: IO[bytes], replies: IO[bytes]) -> bool:
    """Do one thing that is asked for; False where the pipe was closed. An error ends this interpreter."""
    try:
        task, arguments = pickle.load(requests)
    except EOFError:
        return False
    replies.write(pickle.dumps(Call(task, arguments).make(), protocol=5))
    replies.flush()
    return True
