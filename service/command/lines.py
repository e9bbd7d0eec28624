"""Many requests, one a line, answered one a line in their order, by one process or several."""

from __future__ import annotations

import multiprocessing
import os
import signal
import sys
import threading
from collections.abc import Iterator
from concurrent.futures import Future, ProcessPoolExecutor
from itertools import islice
from queue import Queue
from typing import BinaryIO

from service.command.answering import Problem, answered
from service.documents.limits import BODY_BYTES_MAX
from service.documents.writing import to_bytes

CHUNK_LINES = 25
"""Lines that one process is given at once: enough that handing them over costs little beside the work."""

CHUNKS_AHEAD = 4
"""Chunks for each process that are read ahead, so that an endless input is never held whole."""

Chunk = tuple[bytes, bool]
"""The answers to some lines as text, and whether none of them is a problem."""


def answer_lines(file: BinaryIO, jobs: int) -> bool:
    """Answer every line of `file` on standard output; say whether none was refused.

    Blank lines are answered too, so that each answer stands where its request does.
    """
    if jobs > 1:
        return _by_several(_chunks(_lines(file), CHUNK_LINES), jobs)
    # each line is answered before the next is read: whoever writes may be waiting for the answer
    all_well = True
    for chunk in _chunks(_lines(file), 1):
        all_well &= _write(_answer_chunk(chunk))
    return all_well


def _lines(file: BinaryIO) -> Iterator[bytes]:
    """Lines without their ends; of one that is too long only as much as shows it."""
    while line := file.readline(BODY_BYTES_MAX + 2):
        if not line.endswith(b"\n"):
            _pass_over_rest(file)
        yield line.rstrip(b"\r\n")


def _pass_over_rest(file: BinaryIO) -> None:
    while (rest := file.readline(BODY_BYTES_MAX)) and not rest.endswith(b"\n"):
        pass


def _chunks(lines: Iterator[bytes], size: int) -> Iterator[list[bytes]]:
    while chunk := list(islice(lines, size)):
        yield chunk


def _answer_chunk(lines: list[bytes]) -> Chunk:
    answers = [answered(line) for line in lines]
    text = b"".join(to_bytes(told) + b"\n" for told in answers)
    return text, not any(isinstance(told, Problem) for told in answers)


def _write(chunk: Chunk) -> bool:
    text, all_well = chunk
    # past Python's own buffer: what stood in it when the run is broken off would be waited for at exit
    rest = memoryview(text)
    while rest:
        rest = rest[os.write(sys.stdout.fileno(), rest) :]
    return all_well


def _by_several(chunks: Iterator[list[bytes]], jobs: int) -> bool:
    pool = _pool(jobs)
    try:
        with _Writer(ahead=jobs * CHUNKS_AHEAD) as writer:
            for chunk in chunks:
                writer.take(pool.submit(_answer_chunk, chunk))
        return writer.all_well
    finally:
        pool.shutdown(wait=False, cancel_futures=True)


class _Writer:
    """A thread that writes answers in order, so that none waits for a line of input that is not there yet.

    Leaving it without an exception waits for what it was given; with one, nothing is waited for, since
    whoever reads the output may not be reading any more.
    """

    def __init__(self, ahead: int) -> None:
        self.all_well = True
        self._failure: Exception | None = None
        self._chunks: Queue[Future[Chunk] | None] = Queue(ahead)
        self._thread = threading.Thread(target=self._run, daemon=True)

    def __enter__(self) -> _Writer:
        self._thread.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, *_: object) -> None:
        if kind is None:
            self._chunks.put(None)
            self._thread.join()
            self._raise_failure()

    def take(self, chunk: Future[Chunk]) -> None:
        """Write this chunk after those before it. Raises what went wrong with an earlier one."""
        self._raise_failure()
        self._chunks.put(chunk)

    def _raise_failure(self) -> None:
        if self._failure is not None:
            raise self._failure

    def _run(self) -> None:
        while (chunk := self._chunks.get()) is not None:
            if self._failure is None:
                self._try_to_write(chunk)

    def _try_to_write(self, chunk: Future[Chunk]) -> None:
        try:
            self.all_well &= _write(chunk.result())
        except Exception as failure:  # raised where it is seen, in the thread that reads
            self._failure = failure


def _pool(jobs: int) -> ProcessPoolExecutor:
    # forked processes would share numpy's threads and standard input with this one
    context = multiprocessing.get_context("spawn")
    pool = ProcessPoolExecutor(jobs, mp_context=context, initializer=_follow_parent)
    # Ctrl-C reaches the whole group: the processes inherit from their first moment on that it is not for them
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    for _ in range(jobs):
        pool.submit(int)
    signal.signal(signal.SIGINT, before)
    return pool


def _follow_parent() -> None:
    """Leave Ctrl-C to the parent, and end with it: the queue does not tell that nobody feeds it any more."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_after_parent, daemon=True).start()


def _end_after_parent() -> None:
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)
