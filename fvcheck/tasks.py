"""Independent tasks: run one after another here, in processes of this machine, or on a Dask scheduler.

The same function of the same items gives the same results in each of the three.
"""

from __future__ import annotations

import contextlib
import json
import os
import pickle
import signal
import subprocess
import sys
import tempfile
import threading
from collections.abc import Callable, Iterator, Sequence
from queue import Empty, SimpleQueue
from typing import IO, Any

from fvcheck.errors import FvcheckError, SetupError

Task = Callable[[Any], Any]

# How often a task is begun whose process or worker dies under it.
_TRIES = 3

# Seconds to wait for a scheduler to answer, and for a worker where it has none (any more).
_PATIENCE = 20.0

# Tasks handed to a scheduler ahead of its threads: none waits idle, and results do not pile up there.
_AHEAD = 2

# Not multiprocessing: its processes run the caller's script once more, and one that dies breaks the pool.
_CHILD = "import json, sys; sys.path[:] = json.loads(sys.argv[1]); from fvcheck.tasks import serve; serve()"


def run_tasks(
    function: Task,
    items: Sequence[Any],
    *,
    workers: int | None = None,
    scheduler: str | None = None,
    limit: float | None = None,
    progress: Callable[[int], None] | None = None,
) -> list[Any]:
    """``function(item)`` of each item, in their order; where it raises an FvcheckError, that error.

    progress : called with the number of all each time that one is done; the rest as in `each_done`
    """
    found: dict[int, Any] = {}
    for number, result in each_done(function, items, workers=workers, scheduler=scheduler, limit=limit):
        found[number] = result
        if progress is not None:
            progress(len(items))
    return [found[number] for number in range(len(items))]


def each_done(
    function: Task,
    items: Sequence[Any],
    *,
    workers: int | None = None,
    scheduler: str | None = None,
    limit: float | None = None,
) -> Iterator[tuple[int, Any]]:
    """(number, result or FvcheckError) of each item as it is done, in any order.

    function : of a module, or a `functools.partial` of one; it and the items must be possible to pickle
    workers : processes of this machine; None or 0 for this one, one item after another
    scheduler : address of a Dask scheduler, in place of ``workers``
    limit : seconds that an item may take in a process; longer, and it is ended, and an FvcheckError
        stands for its result

    A process or worker that dies is replaced and its item begun again, three
    times in all; then an FvcheckError stands for its result. Other exceptions
    are raised. SetupError for a scheduler that cannot be used.
    """
    if workers is not None and workers < 0:
        raise SetupError(f"{workers} workers are asked for", mend="Give 0 or more.")
    if limit is not None and not (limit > 0 and workers):
        raise SetupError(
            f"a limit of {limit:g} s is given"
            + ("" if workers else " without processes that could be ended"),
            mend="Give a number above 0, and workers.",
        )
    if scheduler is not None:
        if workers:
            raise SetupError("workers and a scheduler are given", mend="A scheduler has workers of its own.")
        return _on_scheduler(function, items, scheduler)
    if workers:
        return _in_processes(function, items, min(workers, len(items)), limit)
    return ((number, guarded(function, item)) for number, item in enumerate(items))


def guarded(function: Task, item: Any) -> Any:
    """The result, or the FvcheckError that stands for it."""
    try:
        return function(item)
    except FvcheckError as error:
        return error


def _pickled(value: Any) -> bytes:
    try:
        return pickle.dumps(value)
    except (pickle.PicklingError, AttributeError, TypeError) as error:
        raise SetupError(
            f"this cannot be handed to another process: {error}", mend="Run it without workers."
        ) from None


def _in_processes(
    function: Task, items: Sequence[Any], count: int, limit: float | None
) -> Iterator[tuple[int, Any]]:
    head = _pickled(function)
    waiting: SimpleQueue[int] = SimpleQueue()
    for number in range(len(items)):
        waiting.put(number)
    done: SimpleQueue[tuple[int, Any]] = SimpleQueue()
    processes = [_Process(head, limit) for _ in range(count)]

    def work(process: _Process) -> None:
        while True:
            try:
                number = waiting.get_nowait()
            except Empty:
                return
            try:
                done.put((number, ("result", process.ask(_pickled(items[number])))))
            except BaseException as error:  # raised again where results are taken
                done.put((number, ("raised", error)))

    threads = [threading.Thread(target=work, args=(process,), daemon=True) for process in processes]
    for thread in threads:
        thread.start()
    try:
        for _ in items:
            number, (kind, value) = done.get()
            if kind == "raised":
                raise value
            yield number, value
    finally:
        while not waiting.empty():
            try:
                waiting.get_nowait()
            except Empty:
                break
        for process in processes:
            process.end()
        for thread in threads:
            thread.join()


class _Process:
    """An interpreter of its own that answers one item after another; begun when first asked."""

    def __init__(self, head: bytes, limit: float | None) -> None:
        self._head, self._limit = head, limit
        self._child: subprocess.Popen[bytes] | None = None
        self._said: IO[bytes] | None = None
        self._ended = False
        self._lock = threading.Lock()

    def ask(self, item: bytes) -> Any:
        """The result or the FvcheckError of an item; whatever else it raised is raised here."""
        for _ in range(_TRIES):
            child = self._begun()
            overdue = threading.Event()
            try:
                assert child.stdin is not None and child.stdout is not None
                with _ended_after(child, self._limit, overdue):
                    _send(child.stdin, item)
                    kind, value = pickle.loads(_receive(child.stdout))  # our own child
            except (OSError, EOFError, ValueError, pickle.UnpicklingError):
                why = self._post_mortem(child)
                if self._ended:
                    break
                if overdue.is_set():
                    return FvcheckError(f"it was ended, having taken longer than {self._limit:g} s")
                continue
            if kind == "raised":
                raise value
            return value
        return FvcheckError(f"the process that ran this died{'' if self._ended else f' ({why})'}")

    def _begun(self) -> subprocess.Popen[bytes]:
        with self._lock:
            if self._ended:
                raise FvcheckError("the processes have been ended")
            if self._child is None:
                self._said = tempfile.TemporaryFile()  # noqa: SIM115
                self._child = subprocess.Popen(
                    [sys.executable, "-c", _CHILD, json.dumps(sys.path)],
                    stdin=subprocess.PIPE,
                    stdout=subprocess.PIPE,
                    stderr=self._said,
                )
                new = self._child
            else:
                return self._child
        assert new.stdin is not None
        _send(new.stdin, self._head)
        return new

    def _post_mortem(self, child: subprocess.Popen[bytes]) -> str:
        """How a child ended, and the last line it said; a new one is begun next time."""
        child.kill()
        code = child.wait()
        assert self._said is not None and child.stdin is not None and child.stdout is not None
        self._said.seek(0)
        said = self._said.read().decode("utf-8", "replace").strip().splitlines()
        for stream in (self._said, child.stdout):
            stream.close()
        with contextlib.suppress(OSError):  # what it did not take any more
            child.stdin.close()
        self._child = None
        ended = f"signal {-code}" if code < 0 else f"exit status {code}"
        return ended + (f": {said[-1]}" if said else "")

    def end(self) -> None:
        """Stop the process, whatever it is at."""
        with self._lock:
            self._ended = True
            child = self._child
        if child is not None:
            child.kill()
            child.wait()


@contextlib.contextmanager
def _ended_after(
    child: subprocess.Popen[bytes], limit: float | None, overdue: threading.Event
) -> Iterator[None]:
    """Within it a child lives no longer than ``limit`` seconds; ``overdue`` is set if it was ended."""
    if limit is None:
        yield
        return

    def end() -> None:
        overdue.set()
        child.kill()

    timer = threading.Timer(limit, end)
    timer.start()
    try:
        yield
    finally:
        timer.cancel()


def _send(stream: IO[bytes], data: bytes) -> None:
    stream.write(len(data).to_bytes(8, "little") + data)
    stream.flush()


def _receive(stream: IO[bytes]) -> bytes:
    size = stream.read(8)
    data = stream.read(int.from_bytes(size, "little")) if len(size) == 8 else b""
    if len(size) < 8 or len(data) < int.from_bytes(size, "little"):
        raise EOFError
    return data


def serve() -> None:
    """Answer items from standard input until it ends: what runs in a process of `_in_processes`."""
    # An interrupt at the keyboard reaches all processes; the one that asked decides.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    # What the work prints must not get between the answers.
    answers = os.fdopen(os.dup(1), "wb")
    os.dup2(2, 1)
    function = pickle.loads(_receive(sys.stdin.buffer))
    while True:
        try:
            item = pickle.loads(_receive(sys.stdin.buffer))
        except EOFError:
            return
        try:
            answer = pickle.dumps(("result", guarded(function, item)))
        except Exception as error:  # carried over, and raised by the one that asked
            answer = _carried(error)
        _send(answers, answer)


def _carried(error: Exception) -> bytes:
    try:
        data = pickle.dumps(("raised", error))
        pickle.loads(data)
        return data
    except Exception:  # an exception of a kind that cannot be taken apart: its text goes over
        return pickle.dumps(("raised", RuntimeError(f"{type(error).__name__}: {error}")))


def _on_scheduler(function: Task, items: Sequence[Any], address: str) -> Iterator[tuple[int, Any]]:
    try:
        from distributed import Client, KilledWorker
    except ImportError:
        raise SetupError(
            "a scheduler needs Dask, which is not installed", mend="pip install 'fvcheck[cluster]'"
        ) from None
    _pickled(function)
    try:
        client = Client(address, timeout=_PATIENCE, set_as_default=False)
    except (OSError, TimeoutError, ValueError, TypeError):
        raise SetupError(
            "no Dask scheduler answers", where=address, mend="Give its address, such as tcp://host:8786."
        ) from None
    with client:
        _await_worker(client, address)
        ahead = _AHEAD * max(1, sum(client.nthreads().values()))
        numbers: dict[Any, int] = {}
        finished: SimpleQueue[Any] = SimpleQueue()
        begun = 0
        while begun < len(items) or numbers:
            while begun < len(items) and len(numbers) < ahead:
                future = client.submit(guarded, function, items[begun], pure=False)
                numbers[future] = begun
                future.add_done_callback(finished.put)
                begun += 1
            try:
                future = finished.get(timeout=_PATIENCE)
            except Empty:
                _await_worker(client, address)
                continue
            number = numbers.pop(future)
            try:
                result = future.result()
            except KilledWorker:
                result = FvcheckError("the workers that ran this died, one after the other")
            del future  # the scheduler may forget the result
            yield number, result


def _await_worker(client: Any, address: str) -> None:
    try:
        client.wait_for_workers(1, timeout=_PATIENCE)
    except TimeoutError:
        raise SetupError(
            "the Dask scheduler has no workers", where=address, mend="Start some: dask worker ADDRESS."
        ) from None
