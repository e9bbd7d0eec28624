"""`gain-signoff recompute`: requests from files, answers on standard output. No database."""

from __future__ import annotations

import multiprocessing
import signal
import sys
from collections import deque
from collections.abc import Iterator
from concurrent.futures import Future, ProcessPoolExecutor
from dataclasses import dataclass
from itertools import islice
from typing import BinaryIO

import click

from service.documents import limits, reading, writing
from service.documents.errors import DocumentError, FieldProblem, InvalidDocument, NotJson, TooLarge
from service.documents.recomputations import RecomputationRequest, answer

CHUNK_LINES = 25
"""Lines that one process is given at once: enough that handing them over costs little beside the work."""

Line = tuple[bytes, bool]
"""The answer to one line, and whether the request was accepted."""

INTERRUPTED = 130
"""Exit status after Ctrl-C, as shells have it: 128 and the signal's number."""

CHUNKS_AHEAD = 4
"""Chunks for each process that are read ahead, so that an endless input is never held whole."""


@click.command()
@click.argument("file", type=click.File("rb"), required=False)
@click.option("--lines", type=click.File("rb"), help="A file with one request a line (- is standard input).")
@click.option(
    "--jobs", type=click.IntRange(1, 256), default=1, show_default=True, help="Processes for --lines."
)
def recompute(file: BinaryIO | None, lines: BinaryIO | None, jobs: int) -> None:
    """Recompute a loop: read one request from FILE, print one answer.

    A request that is refused gives a problem object, and exit status 1. With --lines every line, blank or not,
    gets its answer in its place, and a refused one does not stop the run.
    """
    if (file is None) == (lines is None):
        raise click.UsageError("Give either FILE or --lines FILE.")
    try:
        all_well = _one(file) if file is not None else _many(lines, jobs) if lines is not None else True
        sys.stdout.buffer.flush()
    except BrokenPipeError:
        # the reader has seen enough; what Python flushes at exit must not complain a second time
        sys.stdout = None
        sys.exit(1)
    except KeyboardInterrupt:
        sys.exit(INTERRUPTED)
    sys.exit(0 if all_well else 1)


def _one(file: BinaryIO) -> bool:
    told, well = _answered(file.read(limits.BODY_BYTES_MAX + 1))
    sys.stdout.buffer.write(writing.to_bytes(told, indent=2) + b"\n")
    return well


def _many(file: BinaryIO, jobs: int) -> bool:
    """Answer every line in its order; say whether none was refused."""
    all_well = True
    # one process answers each line before it reads the next: whoever writes may wait for the answer
    chunks = _chunks(_lines(file), CHUNK_LINES if jobs > 1 else 1)
    for answers in _answered_chunks(chunks, jobs):
        for text, well in answers:
            sys.stdout.buffer.write(text + b"\n")
            all_well = all_well and well
        sys.stdout.buffer.flush()
    return all_well


def _lines(file: BinaryIO) -> Iterator[bytes]:
    """Every line, blank ones too, so that answers stand where their requests do; of one that is too long only
    as much as shows it.
    """
    while line := file.readline(limits.BODY_BYTES_MAX + 2):
        too_long = not line.endswith(b"\n") and len(line) > limits.BODY_BYTES_MAX
        while too_long and (rest := file.readline(limits.BODY_BYTES_MAX)) and not rest.endswith(b"\n"):
            pass
        yield line.rstrip(b"\r\n")


def _chunks(lines: Iterator[bytes], size: int) -> Iterator[list[bytes]]:
    while chunk := list(islice(lines, size)):
        yield chunk


def _answered_chunks(chunks: Iterator[list[bytes]], jobs: int) -> Iterator[list[Line]]:
    if jobs == 1:
        yield from map(_answer_lines, chunks)
        return
    # forked processes would share numpy's threads and standard input with this one
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(jobs, mp_context=context, initializer=_ignore_interrupt) as pool:
        yield from _in_order(pool, chunks, ahead=jobs * CHUNKS_AHEAD)


def _in_order(pool: ProcessPoolExecutor, chunks: Iterator[list[bytes]], ahead: int) -> Iterator[list[Line]]:
    """Keep `ahead` chunks in work and give the answers in the order of the chunks."""
    waiting: deque[Future[list[Line]]] = deque()
    try:
        for chunk in chunks:
            waiting.append(pool.submit(_answer_lines, chunk))
            if len(waiting) >= ahead:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()
    finally:
        pool.shutdown(wait=False, cancel_futures=True)


def _ignore_interrupt() -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C reaches the whole group; the parent ends the rest


def _answer_lines(lines: list[bytes]) -> list[Line]:
    return [(writing.to_bytes(told), well) for told, well in map(_answered, lines)]


def _answered(raw: bytes) -> tuple[object, bool]:
    """Return the answer to one request and True, or the problem with it and False."""
    try:
        return answer(reading.read(RecomputationRequest, raw)), True
    except DocumentError as error:
        return _problem(error), False


@dataclass(frozen=True, kw_only=True, slots=True)
class Problem:
    """A request that is refused, in the shape of RFC 9457 and with the words of the service over HTTP."""

    title: str
    status: int
    detail: str
    errors: tuple[FieldProblem, ...]


def _problem(error: DocumentError) -> Problem:
    title, status = next(told for kind, told in _PROBLEMS.items() if isinstance(error, kind))
    return Problem(title=title, status=status, detail=error.detail, errors=error.errors)


_PROBLEMS: dict[type[DocumentError], tuple[str, int]] = {
    TooLarge: ("The body is too large", 413),
    NotJson: ("The body is not JSON as this service reads it", 400),
    InvalidDocument: ("Fields of the body cannot be accepted", 422),
}
