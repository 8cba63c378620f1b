"""Work spread over processes: in order, whatever happens over one task, and ended at once by an interrupt."""

import multiprocessing
import os
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from eastfall.io.crew import each
from eastfall.io.errors import LogError
from eastfall.io.folder import SUMMARY_KEYS, reduce_folder
from eastfall.io.runlog import verify_log
from eastfall.io.spread import spread

LOGS = sorted((Path(__file__).parents[2] / "replay_logs").glob("*.eastfall.jsonl"))
LONG_ENOUGH = 60.0
MAIN = "from eastfall.tui.main import main; main()"
DIES = "__import__('os')._exit(3)"


def lost(task: str, why: str) -> object:
    """Return what became of a task that was not done."""
    return task, why


@pytest.mark.parametrize("count", [1, 2, 9])
def test_results_come_in_the_order_of_the_tasks(count: int) -> None:
    """Tasks of unlike length, more or fewer than there are processes; none leave a process behind."""
    tasks = [f"sum(range({10 ** (5 - n % 6)})) * 0 + {n}" for n in range(8)]
    assert list(each(eval, tasks, lost, count)) == list(range(8))
    assert not multiprocessing.active_children()


def test_a_task_that_ends_its_process_or_raises_is_known_and_the_others_are_done() -> None:
    """Each process dies more than once, and the last task is one of those; every other task has its result."""
    tasks = ["1 + 1", DIES, "1 / 0", DIES, "2 + 2", DIES, "3 + 3", DIES]
    found = list(each(eval, tasks, lost, 2))
    assert [one for one in found if isinstance(one, int)] == [2, 4, 6]
    assert found[2] == ("1 / 0", "ZeroDivisionError: division by zero")
    died = (DIES, "the process that worked on it ended with 3")
    assert [found[number] for number in (1, 3, 5, 7)] == [died] * 4


def test_whoever_stops_asking_leaves_no_process_behind() -> None:
    """Left after the first result, with tasks at work that would take for ever, the processes are gone."""
    working = each(eval, ["1", "__import__('time').sleep(1e6)", "2"], lost, 2)
    assert next(working) == 1
    working.close()  # type: ignore[attr-defined]
    assert not multiprocessing.active_children()


def test_what_nobody_foresaw_over_one_file_is_its_line_also_without_other_processes() -> None:
    """A fault of the program over one file names the file, and does not keep the others from their result."""
    files = [Path("a"), Path("b")]
    made = list(spread(_only_b, files, lost=lambda path, why: f"{path.name} lost: {why}", workers=1))
    assert made == ["a lost: a: KeyError: 'a'", "b"]


def _only_b(path: Path) -> str:
    return {"b": "b"}[path.name]


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no pipes with names here")
def test_a_pipe_among_the_logs_is_refused_and_not_waited_for(tmp_path: Path) -> None:
    """A pipe that is named like a log has its line; the log beside it is worked through."""
    shutil.copy(LOGS[0], tmp_path)
    pipe = tmp_path / "pipe.eastfall.jsonl"
    os.mkfifo(pipe)
    found = reduce_folder(tmp_path, workers=1)
    assert [one["error"] for one in found] == [
        None,
        f"{pipe}: cannot be read: a pipe or a device; expected a run log",
    ]
    assert tuple(found[1]) == SUMMARY_KEYS
    with pytest.raises(LogError, match="a pipe or a device"):
        verify_log(pipe)


@pytest.mark.skipif(os.name != "posix", reason="interrupts by POSIX signal")
@pytest.mark.parametrize("verb", ["reduce", "runs"])
def test_an_interrupt_ends_work_on_a_folder_with_130_and_no_traceback(verb: str, tmp_path: Path) -> None:
    """Interrupted like by Ctrl-C at the first run told, two processes at work: nothing but the count was said."""
    pty = pytest.importorskip("pty")
    for number in range(60):
        shutil.copy(LOGS[number % len(LOGS)], tmp_path / f"{number:02d}.eastfall.jsonl")
    ours, theirs = pty.openpty()
    words = [sys.executable, "-c", MAIN, verb, str(tmp_path), "--workers", "2", "--format", "csv"]
    with subprocess.Popen(words, stdout=subprocess.PIPE, stderr=theirs, start_new_session=True) as process:
        os.close(theirs)
        said = b""
        while b"1 of 60 runs" not in said:
            said += os.read(ours, 1000)
        os.killpg(process.pid, signal.SIGINT)
        out, _ = process.communicate(timeout=LONG_ENOUGH)
    assert process.returncode == 130
    assert out == b""
    said += _rest(ours)
    assert b"Traceback" not in said, said
    assert said.startswith(b"\r0 of 60 runs\r1 of 60 runs")


def _rest(terminal: int) -> bytes:
    """Return what a terminal still holds that nobody writes to any more."""
    said = b""
    while True:
        try:
            more = os.read(terminal, 1000)
        except OSError:
            more = b""
        if not more:
            os.close(terminal)
            return said
        said += more
