"""`gain-signoff recompute`: requests from files, answers on standard output. No database."""

from __future__ import annotations

import os
import sys
from typing import BinaryIO

import click

from service.command.answering import Problem, answered
from service.documents.limits import BODY_BYTES_MAX
from service.documents.writing import to_bytes

JOBS_MAX = 256
INTERRUPTED = 130
"""Exit status after Ctrl-C, as shells have it: 128 and the signal's number."""


@click.command()
@click.argument("file", type=click.File("rb"), required=False)
@click.option("--lines", type=click.File("rb"), help="A file with one request a line (- is standard input).")
@click.option(
    "--jobs",
    type=click.IntRange(1, JOBS_MAX),
    default=1,
    show_default=True,
    help="Processes for --lines; with more than one, lines are taken 25 at a time.",
)
def recompute(file: BinaryIO | None, lines: BinaryIO | None, jobs: int) -> None:
    """Recompute a loop: read one request from FILE, print one answer.

    A request that is refused gives a problem object, and exit status 1. With --lines every line, blank or
    not, gets its answer in its place, and a refused one does not stop the run.
    """
    try:
        all_well = _answer(file, lines, jobs)
    except BrokenPipeError:
        # the reader has seen enough; Python's own flush at exit must not complain a second time
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(1)
    except KeyboardInterrupt:
        sys.exit(INTERRUPTED)
    sys.exit(0 if all_well else 1)


def _answer(file: BinaryIO | None, lines: BinaryIO | None, jobs: int) -> bool:
    if file is not None and lines is None:
        return _one(file)
    if lines is not None and file is None:
        from service.command.lines import answer_lines  # noqa: PLC0415  pools cost the start of one request

        return answer_lines(lines, jobs)
    raise click.UsageError("Give either FILE or --lines FILE.")


def _one(file: BinaryIO) -> bool:
    told = answered(file.read(BODY_BYTES_MAX + 1))
    sys.stdout.buffer.write(to_bytes(told, indent=2) + b"\n")
    sys.stdout.buffer.flush()
    return not isinstance(told, Problem)
