"""The second interpreter: what it does is what this one would do, and what it fails to do is done here."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from concurrent.futures import Future
from pathlib import Path

import pytest

from sms_resource import second

HERE = __name__


@pytest.fixture(autouse=True)
def apart(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """An interpreter of its own for each test, on two processors at least."""
    monkeypatch.setattr(second, "_known", None)
    monkeypatch.setattr(second, "processors", lambda: 2)
    yield
    second.stop()


def total(values: list[float]) -> float:
    print("what a task prints is no answer")
    return sum(values)


def fail(_: int) -> None:
    raise ZeroDivisionError


def process() -> int:
    return os.getpid()


def wait(seconds: float) -> float:
    time.sleep(seconds)
    return seconds


def asked(function: str, *arguments: object) -> Future[object]:
    found = second.ask(f"{HERE}:{function}", *arguments)
    assert found is not None
    return found


def test_answers_come_in_order_and_from_another_process() -> None:
    numbers = [asked("total", [float(n), 1.0]) for n in range(20)]
    assert [second.answer(item) for item in numbers] == [n + 1.0 for n in range(20)]
    elsewhere = second.answer(asked("process"))
    assert elsewhere not in (None, os.getpid()) and elsewhere == second.answer(asked("process"))


def test_arguments_are_taken_as_they_are_when_asked() -> None:
    values = [1.0, 2.0]
    waiting = asked("wait", 0.2)
    found = asked("total", values)
    values.append(100.0)
    assert second.answer(found) == 3.0 and second.answer(waiting) == 0.2


@pytest.mark.parametrize("function", ["fail", "missing"])
def test_a_task_that_fails_has_no_answer_and_the_next_has_one(function: str) -> None:
    first = second.answer(asked("process"))
    assert second.answer(asked(function, 1)) is None
    for _ in range(100):
        if second.start() is not None and second.answer(asked("process")) not in (None, first):
            break
        time.sleep(0.05)
    assert second.answer(asked("total", [2.0])) == 2.0


def test_a_child_that_is_killed_at_work_has_no_answer() -> None:
    other = second.answer(asked("process"))
    waiting, later = asked("wait", 60.0), asked("total", [1.0])
    time.sleep(0.2)
    os.kill(other, signal.SIGKILL)
    assert second.answer(waiting) is None and second.answer(later) is None


def test_what_cannot_be_sent_is_not_asked() -> None:
    assert second.ask(f"{HERE}:total", lambda: 1) is None
    assert second.answer(None) is None


def test_one_processor_has_no_second_interpreter(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(second, "processors", lambda: 1)
    assert second.start() is None and second.ask(f"{HERE}:process") is None


def test_an_interpreter_that_cannot_be_started_is_none(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "executable", "/nowhere/python")
    assert second.start() is None


def running(process: int) -> bool:
    """Whether a process is at work; one that ended and that nobody has asked after is not."""
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    state = Path(f"/proc/{process}/stat")
    return not state.is_file() or state.read_text().rpartition(")")[2].split()[0] != "Z"


@pytest.mark.skipif(sys.platform == "win32", reason="signals of this kind are POSIX")
def test_it_ends_with_the_process_that_started_it() -> None:
    program = (
        "from sms_resource import second; second.processors = lambda: 2; "
        "print(second.start()._child.pid, flush=True); import time; time.sleep(60)"
    )
    with subprocess.Popen([sys.executable, "-c", program], stdout=subprocess.PIPE, text=True) as first:
        assert first.stdout is not None
        child = int(first.stdout.readline())
        os.kill(child, 0)
        first.kill()
    for _ in range(200):
        if not running(child):
            return
        time.sleep(0.05)
    raise AssertionError("the second interpreter is still there")


def test_importing_it_imports_nothing_slow() -> None:
    program = (
        "import sys; from sms_resource.reporting import ahead, pages; "
        "print(sorted({'numpy', 'pandas', 'matplotlib', 'typst'} & set(sys.modules)))"
    )
    said = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, timeout=60
    )
    assert said.stdout.strip() == "[]"
