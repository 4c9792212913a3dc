"""Long runs of independent chunks: a journal that survives every interruption, processes, and other machines."""

from __future__ import annotations

import concurrent.futures
import contextlib
import functools
import itertools
import json
import os
import pickle
import struct
import sys
import tempfile
import threading
import time
import warnings
import zlib
from collections.abc import Callable, Generator, Iterable
from pathlib import Path
from typing import IO, Any, cast

from harvest.errors import HarvestError, InputError, MissingExtraError, NoAnswerError
from harvest.version import VERSION

Task = Callable[[int], bytes]
"""What makes the bytes of a chunk from its number; it is pickled for other processes."""
Progress = Callable[[int, int], None]
Results = Generator[tuple[int, bytes], None, None]

MOST_BREAKS = 3
"""How often in a row all processes may be lost without any chunk between."""
AHEAD = 2
"""Chunks given out for each process, so that none waits for its next."""
SCHEDULER_PATIENCE = 10.0
"""How long a scheduler's first answer is waited for [s]."""
_HEAD = struct.Struct("<QQI")


class Journal:
    """Finished chunks on disk, in the order in which they came; each is there whole and checked, or not at all.

    The first line says what the run is. A chunk is forced to the disk before it counts as finished. What a broken run
    left half-written at the end is cut off. Closing keeps the file; `discard` removes it.
    """

    def __init__(self, path: Path | None, identity: dict[str, Any]) -> None:
        """Begin a journal, or go on with the one at `path`; without a path it lasts as long as the object.

        Raises InputError where the journal is of another run or in use.
        """
        self.path = path
        self.identity = identity
        self.finished: dict[int, tuple[int, int]] = {}
        try:
            self._file: IO[bytes] = tempfile.TemporaryFile() if path is None else path.open("a+b")  # noqa: SIM115
        except OSError as error:
            raise InputError(f"{path}: cannot be written ({error.strerror})") from None
        try:
            if path is not None:
                _lock(self._file, path)
            self._file.seek(0)
            line = self._file.readline()
            if line.endswith(b"\n"):
                self._go_on(line)
            else:
                self._file.truncate(0)
                self._write(json.dumps(identity).encode() + b"\n")
        except BaseException:
            self._file.close()
            raise

    def _go_on(self, line: bytes) -> None:
        """Find the chunks that are whole."""
        try:
            found = json.loads(line)
            run = found["run"]
        except (ValueError, TypeError, KeyError):
            raise InputError(f"{self.path}: is no journal of a sweep; remove it or choose another output") from None
        if run != self.identity["run"]:
            raise InputError(
                f"{self.path}: is of another sweep: the case, its [sweep], the options or the program have changed; "
                "call the program as then, or remove the file to begin anew"
            )
        self.identity = found
        whole, size = len(line), os.fstat(self._file.fileno()).st_size
        while len(head := self._file.read(_HEAD.size)) == _HEAD.size:
            index, length, check = _HEAD.unpack(head)
            place = whole + _HEAD.size
            if length > size - place or _check(index, self._file.read(length)) != check:
                break
            self.finished[index] = (place, length)
            whole = place + length
        self._file.truncate(whole)

    def add(self, index: int, content: bytes) -> None:
        """Keep a chunk for good."""
        place = self._file.seek(0, os.SEEK_END) + _HEAD.size
        self._write(_HEAD.pack(index, len(content), _check(index, content)) + content)
        self.finished[index] = (place, len(content))

    def _write(self, content: bytes) -> None:
        try:
            self._file.write(content)
            self._file.flush()
            if self.path is not None:
                getattr(os, "fdatasync", os.fsync)(self._file.fileno())
        except OSError as error:
            raise InputError(f"{self.path or 'temporary file'}: cannot be written ({error.strerror})") from None

    def chunks(self, count: int) -> Generator[bytes, None, None]:
        """Contents of all chunks in the order of their numbers."""
        for index in range(count):
            place, length = self.finished[index]
            self._file.seek(place)
            yield self._file.read(length)

    def close(self) -> None:
        """Let go of the file."""
        self._file.close()

    def discard(self) -> None:
        """Remove a journal whose result is written."""
        if self.path is not None:
            self.path.unlink(missing_ok=True)
        self.close()


def _check(index: int, content: bytes) -> int:
    return zlib.crc32(content, index & 0xFFFFFFFF)


def _lock(file: IO[bytes], path: Path) -> None:
    """Keep a second run from the same file, where the system can; a lock ends with its process, however that ends."""
    try:
        import fcntl
    except ImportError:
        return
    for patience in (0.1, 0.3, 0.6):  # processes of a killed run end a moment after it
        with contextlib.suppress(OSError):
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
            return
        time.sleep(patience)
    raise InputError(f"{path}: another run is writing it; wait for it or stop it")


def run_chunks(
    task: Task,
    count: int,
    journal: Journal,
    *,
    jobs: int = 1,
    scheduler: str | None = None,
    progress: Progress | None = None,
) -> None:
    """Do all chunks that the journal does not hold yet, here, on `jobs` processes, or on the workers of a scheduler.

    `progress` is told how many of all are done. A lost process costs its chunk only, which is done again. Raises
    NoAnswerError where processes are lost again and again, InputError where no scheduler answers.
    """
    tell = progress or (lambda done, of: None)
    wanted = [index for index in range(count) if index not in journal.finished]
    tell(len(journal.finished), count)
    if scheduler is not None:
        results: Results = _on_scheduler(task, wanted, scheduler)
    elif jobs > 1 and len(wanted) > 1:
        results = _on_processes(task, wanted, min(jobs, len(wanted)))
    else:
        results = ((index, task(index)) for index in wanted)
    with contextlib.closing(results):
        for index, content in results:
            journal.add(index, content)
            tell(len(journal.finished), count)


def _on_processes(task: Task, wanted: list[int], jobs: int) -> Results:
    """Results of own processes in any order; when one is killed all are begun anew with what is still to do."""
    work, left, breaks = _packed(task), dict.fromkeys(wanted), 0
    while left:
        pool = concurrent.futures.ProcessPoolExecutor(jobs, _process_context(), initializer=_begin_process)
        try:
            with warnings.catch_warnings():
                # newer Pythons warn of forking beside threads, and those of the linear algebra are idle
                warnings.simplefilter("ignore", DeprecationWarning)
                pool.submit(os.getpid)
            for index, content in _completed(pool, work, list(left), AHEAD * jobs):
                del left[index]
                breaks = 0
                yield index, content
        except concurrent.futures.BrokenExecutor:
            breaks += 1
            if breaks >= MOST_BREAKS:
                raise NoAnswerError(
                    f"processes were killed {breaks} times in a row, perhaps for want of memory; finished chunks are "
                    "kept, so go on with --resume and fewer --jobs"
                ) from None
        finally:
            pool.shutdown(wait=True, cancel_futures=True)


def _process_context() -> Any:
    """Way to begin a process: a copy that has everything loaded already, where that is safe, or else a new one."""
    import multiprocessing

    alone = sys.platform == "linux" and threading.active_count() == 1
    return multiprocessing.get_context("fork" if alone else "spawn")


def _on_scheduler(task: Task, wanted: list[int], address: str) -> Results:
    """Results of the workers of a dask scheduler in any order; it gives the chunks of a lost worker to others."""
    try:
        from distributed import Client
    except ImportError:
        raise MissingExtraError(
            '--scheduler needs dask.distributed, which is not installed; install it with pip install "harvest[cluster]"'
        ) from None
    try:
        connect: Any = Client
        client = connect(address, timeout=SCHEDULER_PATIENCE, set_as_default=False)
    except (OSError, ValueError, TypeError) as error:
        raise InputError(f"--scheduler {address}: no scheduler answers there ({_first_line(error)})") from None
    with client:
        threads = sum(client.nthreads().values())
        if not threads:
            raise InputError(f"--scheduler {address}: has no workers; start some with: dask worker {address}")
        try:
            yield from _completed(client.get_executor(pure=False), _packed(task), wanted, AHEAD * threads)
        except HarvestError:
            raise
        except Exception as error:
            # what the other machines lack, or what they lost too often, arrives in many forms
            raise NoAnswerError(
                f"--scheduler {address}: the workers failed ({type(error).__name__}: {_first_line(error)}); finished "
                "chunks are kept, so go on with --resume"
            ) from None


def _first_line(error: BaseException) -> str:
    return next(iter(str(error).splitlines()), "")


def _completed(executor: concurrent.futures.Executor, work: bytes, wanted: Iterable[int], at_once: int) -> Results:
    """Give out chunks, some at a time, and yield each when it is done."""
    coming = iter(wanted)
    waiting: dict[concurrent.futures.Future[bytes], int] = {}
    try:
        while True:
            for index in itertools.islice(coming, at_once - len(waiting)):
                waiting[executor.submit(_perform, work, index)] = index
            if not waiting:
                return
            done, _ = concurrent.futures.wait(waiting, return_when=concurrent.futures.FIRST_COMPLETED)
            # those that were done before a process was lost come first
            for future in sorted(done, key=lambda each: each.exception() is not None):
                yield waiting[future], future.result()
                del waiting[future]
    finally:
        for future in waiting:
            future.cancel()


def _packed(task: Task) -> bytes:
    return pickle.dumps((VERSION, pickle.dumps(task)))


@functools.lru_cache(1)
def _unpacked(work: bytes) -> Task:
    """Read the task of a run, once in a process."""
    version, task = pickle.loads(work)
    if version != VERSION:
        raise InputError(f"the program is harvest {version}, and a worker has {VERSION}; install the same on both")
    return cast("Task", pickle.loads(task))


def _perform(work: bytes, index: int) -> bytes:
    """Do a chunk in another process."""
    return _unpacked(work)(index)


def _begin_process() -> None:
    """Leave the interrupt key to the first process, and end with it even when it is killed."""
    import multiprocessing
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    first = multiprocessing.parent_process()
    assert first is not None

    def end_with_first() -> None:
        first.join()
        os._exit(1)

    threading.Thread(target=end_with_first, daemon=True).start()
