"""Run the cases of a study on the cores of this machine, and leave nothing half done."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
import time
from collections import deque
from collections.abc import Callable, Generator, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import closing, contextmanager
from dataclasses import dataclass
from multiprocessing.process import BaseProcess
from pathlib import Path
from typing import Any

from ... import InputError
from .. import plugins
from ..files import write_json, write_text
from . import results
from .cases import Case
from .evaluate import draw_mask, evaluate, prepared_for
from .machine import cores, threads_of_children
from .plan import Study
from .tables import Row, cases_csv, summary_csv
from .verdict import decide

SECONDS_TO_END = 10.0
"""How long a worker may clean up after Ctrl-C before it is killed."""


@dataclass(frozen=True)
class Failure:
    """A case that could not be finished.

    Attributes
    ----------
    case : Case
    message : str
        Why, in one line.
    """

    case: Case
    message: str


@dataclass(frozen=True)
class Outcome:
    """What a run did.

    Attributes
    ----------
    done : int
        Cases that were run now.
    skipped : int
        Cases that were finished before.
    failed : tuple of Failure
        Cases that could not be finished; the next run tries them again.
    verdict : dict
        As `verdict.json` says it.
    """

    done: int
    skipped: int
    failed: tuple[Failure, ...]
    verdict: dict[str, Any]


def run(study: Study, folder: str | Path, workers: int | None = None, progress: bool = True) -> Outcome:
    """Run what is left of a study, and write its tables and its verdict.

    Parameters
    ----------
    study : Study
    folder : str or Path
        The results folder; finished cases in it are not run again.
    workers : int, optional
        Processes; one a core when not given. With 1, or a single case, everything runs in this process.
    progress : bool
        Show a progress bar, when standard error is a terminal.

    Returns
    -------
    Outcome

    Raises
    ------
    InputError
        The folder belongs to another study or cannot be written to, or the reference cannot be used.
    KeyboardInterrupt
        On Ctrl-C; finished cases stay, and the message says how many.
    """
    if workers is not None and workers < 1:
        raise InputError(f"workers must be at least 1, not {workers}")
    folder = Path(folder)
    results.check_folder(folder, study)
    cases = study.cases()
    measures = list(plugins.measures())
    records = {case.id: results.read_record(folder, case, measures) for case in cases}
    todo = [case for case in cases if records[case.id] is None]
    _prepare(study, folder, cases)

    failures: dict[str, str] = {}
    done = 0
    with _progress_bar(len(cases), len(cases) - len(todo), progress) as advance:
        try:
            with (
                _one_interrupt(),
                closing(_finished(todo, folder, min(workers or cores(), len(todo)))) as finished,
            ):
                for case, message in finished:
                    if message:
                        failures[case.id] = message
                    else:
                        records[case.id] = results.read_record(folder, case, measures)
                        done += 1
                    advance()
        except KeyboardInterrupt:
            kept = len(cases) - len(todo) + done
            raise KeyboardInterrupt(
                f"stopped; {kept} of {len(cases)} cases are finished and kept, "
                "the same command goes on from there"
            ) from None

    rows = [Row(case, records[case.id], failures.get(case.id, "")) for case in cases]
    verdict = results.finite(decide(study.about.title, rows, study.limits, measures))
    verdict["warnings"] = [*study.warnings(), *verdict["warnings"]]
    write_text(folder / "cases.csv", cases_csv(rows, measures))
    write_text(folder / "summary.csv", summary_csv(rows, measures))
    write_json(folder / "verdict.json", verdict)
    failed = tuple(Failure(case, failures[case.id]) for case in cases if case.id in failures)
    return Outcome(done, len(cases) - len(todo), failed, verdict)


def run_case(case: Case, folder: Path, threads: int) -> str:
    """Run one case and write it; return why it failed, or an empty text."""
    try:
        results.write_case(folder, case, prepared_for(case), evaluate(case, threads))
    except Exception as error:
        results.discard_case(folder, case)
        message = " ".join(str(error).split())
        return message if isinstance(error, InputError) else f"{type(error).__name__}: {message}"
    except BaseException:
        # interrupted: not a failure of the case
        results.discard_case(folder, case)
        raise
    return ""


def _prepare(study: Study, folder: Path, cases: list[Case]) -> None:
    """Open the folder and write the reference images that are missing; refuse first what cannot be used."""
    by_reference = {case.reference_id: case for case in reversed(cases)}
    missing = {
        results.reference_file(folder, cases, case): case
        for case in reversed(by_reference.values())
        if not results.holds_reference(results.reference_file(folder, cases, case), case)
    }
    for case in missing.values():
        prepared_for(case)
    # what a pattern cannot give is refused before anything is written
    for case in {(case.reference, case.sampling, case.pattern): case for case in cases}.values():
        draw_mask(case, prepared_for(case))
    results.open_folder(folder, study)
    for path, case in missing.items():
        results.write_reference(path, case, prepared_for(case))


def _finished(todo: list[Case], folder: Path, workers: int) -> Generator[tuple[Case, str]]:
    """Yield each case as it ends, with why it failed or an empty text."""
    if workers <= 1:
        for case in todo:
            yield case, run_case(case, folder, cores())
    else:
        yield from _in_processes(todo, folder, workers)


def _in_processes(todo: list[Case], folder: Path, workers: int) -> Iterator[tuple[Case, str]]:
    waiting = deque(todo)
    try:
        while waiting:
            suspects = deque((yield from _in_pool(waiting, folder, workers)))
            while suspects:
                # one after the other, so that a second death is the doing of the case itself
                for case in (yield from _in_pool(suspects, folder, 1)):
                    yield case, "the worker process ended (killed, or out of memory)"
    finally:
        for case in todo:
            # what a worker that was killed has left
            if not results.is_finished(folder, case):
                results.discard_case(folder, case)


def _in_pool(
    waiting: deque[Case], folder: Path, workers: int
) -> Generator[tuple[Case, str], None, list[Case]]:
    """Take cases from `waiting` and yield each as it ends.

    A worker process that is killed takes its pool with it: those that were in flight are returned then, and
    the rest is still waiting.
    """
    threads = max(1, cores() // workers)
    others = set(multiprocessing.active_children())
    context = multiprocessing.get_context("spawn")
    running: dict[Future[str], Case] = {}
    lost: list[Case] = []
    whole = False
    with threads_of_children(threads):
        executor = ProcessPoolExecutor(workers, mp_context=context, initializer=_start_worker)
        try:
            while running or (waiting and not lost):
                # no more than there are workers: those submitted are those in flight
                while waiting and not lost and len(running) < workers:
                    with _interrupts_held():
                        running[executor.submit(_work, waiting[0], folder, threads)] = waiting[0]
                    waiting.popleft()
                for future in wait(running, return_when=FIRST_COMPLETED).done:
                    case = running.pop(future)
                    if isinstance(future.exception(), BrokenProcessPool):
                        lost.append(case)
                    else:
                        yield case, _message(future)
            whole = not lost
        except BrokenProcessPool:
            # found when a case was to be submitted
            lost += running.values()
        finally:
            # Ctrl-C, a death, or the caller went away: whoever runs a case cleans up after it, then all end.
            if not whole:
                executor.shutdown(wait=False, cancel_futures=True)
                _end(set(multiprocessing.active_children()) - others)
            executor.shutdown()
    return lost


@contextmanager
def _interrupts_held() -> Iterator[None]:
    """Let processes that start meanwhile hold Ctrl-C, which reaches all of them, until they ignore it."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    usual = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, usual)


def _end(workers: set[BaseProcess]) -> None:
    """Ask worker processes to clean up and end, and do not wait for ever."""
    for worker in workers:
        worker.terminate()
    patience = time.monotonic() + SECONDS_TO_END
    for worker in workers:
        worker.join(max(0.0, patience - time.monotonic()))
        if worker.is_alive():
            worker.kill()


def _message(future: Future[str]) -> str:
    try:
        return future.result()
    except Exception as error:
        # the answer could not be sent
        return f"{type(error).__name__}: {' '.join(str(error).split())}"


class _Stopped(BaseException):
    """The parent process asks for an end."""


_working = threading.Event()


def _start_worker() -> None:
    """Leave Ctrl-C to the parent, end when it says so, and end when it is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, _stop)
    parent = multiprocessing.parent_process()
    assert parent is not None
    threading.Thread(target=lambda: (parent.join(), os._exit(1)), daemon=True).start()


def _stop(signum: int, frame: Any) -> None:
    signal.signal(signal.SIGTERM, signal.SIG_IGN)
    if _working.is_set():
        raise _Stopped
    os._exit(1)


def _work(case: Case, folder: Path, threads: int) -> str:
    _working.set()
    try:
        return run_case(case, folder, threads)
    except _Stopped:
        # at once: the queues of a pool that lost a worker may be locked for ever
        os._exit(1)
    finally:
        _working.clear()


@contextmanager
def _one_interrupt() -> Iterator[None]:
    """Let the first Ctrl-C raise KeyboardInterrupt, and the next ones not disturb the cleaning up."""
    usual = signal.getsignal(signal.SIGINT)
    if usual is not signal.default_int_handler or threading.current_thread() is not threading.main_thread():
        yield
        return

    def interrupt(signum: int, frame: Any) -> None:
        signal.signal(signal.SIGINT, signal.SIG_IGN)
        raise KeyboardInterrupt

    signal.signal(signal.SIGINT, interrupt)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, usual)


@contextmanager
def _progress_bar(total: int, completed: int, shown: bool) -> Iterator[Callable[[], None]]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    console = Console(stderr=True)
    columns = (TextColumn("cases"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=console, disable=not (shown and console.is_terminal)) as bar:
        task = bar.add_task("cases", total=total, completed=completed)
        yield lambda: bar.advance(task)
