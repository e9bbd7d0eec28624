"""`gain-signoff recompute` as whoever calls it sees it: a process, its output, its exit status."""

from __future__ import annotations

import json
import os
import resource
import signal
import subprocess
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from subprocess import PIPE
from typing import Any

import pytest

from service.documents.examples import EXAMPLES
from service.documents.reading import read
from service.documents.recomputations import RecomputationAnswer, RecomputationRequest, answer

ROOT = Path(__file__).parents[2]
REQUEST = EXAMPLES[RecomputationRequest]
COLD_START_S_MAX = 1.5
TIMEOUT_S = 60.0


def command(*arguments: str) -> list[str]:
    return [sys.executable, "-m", "service.command", "recompute", *arguments]


def run(*arguments: str, fed: bytes = b"") -> subprocess.CompletedProcess[bytes]:
    return subprocess.run(
        command(*arguments), input=fed, capture_output=True, cwd=ROOT, check=False, timeout=TIMEOUT_S
    )


@contextmanager
def started(*arguments: str) -> Iterator[subprocess.Popen[bytes]]:
    """The command with pipes at all three ends, in a group of its own that does not outlive the test."""
    with subprocess.Popen(
        command(*arguments), stdin=PIPE, stdout=PIPE, stderr=PIPE, cwd=ROOT, start_new_session=True
    ) as process:
        watchdog = threading.Timer(TIMEOUT_S, process.kill)
        watchdog.start()
        try:
            yield process
        finally:
            watchdog.cancel()
            with suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)


def lines(gains: list[float]) -> bytes:
    """A request a line, with another gain in each."""
    requests = []
    for gain in gains:
        controller = {**REQUEST["controller"], "proportional": {"value": gain, "unit": "gain"}}
        requests.append(json.dumps({**REQUEST, "controller": controller}).encode() + b"\n")
    return b"".join(requests)


def ideal_gain(answered: dict[str, Any]) -> float:
    gain = answered["equivalent_gains"][0]["controller"]["proportional"][0]["value"]
    assert isinstance(gain, float)
    return gain


@pytest.fixture
def request_file(tmp_path: Path) -> str:
    file = tmp_path / "request.json"
    file.write_text(json.dumps(REQUEST))
    return str(file)


def test_one_request_gives_the_answer_that_the_service_gives(request_file: str) -> None:
    done = run(request_file)
    assert (done.returncode, done.stderr) == (0, b"")
    assert read(RecomputationAnswer, done.stdout) == answer(
        read(RecomputationRequest, json.dumps(REQUEST).encode())
    )


def test_one_answer_is_laid_out_for_people(request_file: str) -> None:
    assert run(request_file).stdout.startswith(b'{\n  "verdict": "stable",\n')


def test_a_file_named_minus_is_standard_input() -> None:
    assert json.loads(run("-", fed=json.dumps(REQUEST).encode()).stdout)["verdict"] == "stable"


def test_a_refused_request_gives_a_problem_and_status_1(tmp_path: Path) -> None:
    file = tmp_path / "request.json"
    file.write_text(json.dumps({**REQUEST, "settling_band_percent": 0}))
    done = run(str(file))
    problem = json.loads(done.stdout)
    assert (done.returncode, problem["status"]) == (1, 422)
    assert problem["errors"] == [{"pointer": "/settling_band_percent", "detail": "the value is 0.1 or more"}]


def test_lines_are_answered_one_a_line_in_their_order() -> None:
    gains = [0.5, 1.5, 1.0]
    done = run("--lines", "-", fed=lines(gains))
    assert done.returncode == 0
    assert [ideal_gain(json.loads(line)) for line in done.stdout.splitlines()] == gains


def test_several_processes_give_the_same_lines_in_the_same_order() -> None:
    fed = lines([0.5 + 0.01 * number for number in range(60)])
    assert run("--lines", "-", "--jobs", "2", fed=fed).stdout == run("--lines", "-", fed=fed).stdout


@pytest.mark.parametrize(
    ("bad", "status", "jobs"),
    [
        (b"not json", 400, "1"),
        (b"", 400, "1"),
        (b"{}", 422, "1"),
        (b'{"a": NaN}', 400, "1"),
        (b" " * 1_000_001, 413, "1"),
        (b"not json", 400, "2"),
    ],
    ids=["text", "blank", "empty object", "NaN", "too long", "two processes"],
)
def test_a_bad_line_gives_a_problem_in_its_place_and_the_run_goes_on(
    bad: bytes, status: int, jobs: str
) -> None:
    done = run("--lines", "-", "--jobs", jobs, fed=lines([0.5]) + bad + b"\n" + lines([1.0]))
    first, problem, last = (json.loads(line) for line in done.stdout.splitlines())
    assert done.returncode == 1
    assert (ideal_gain(first), ideal_gain(last)) == (0.5, 1.0)
    assert {"title", "status", "errors"} <= set(problem)
    assert problem["status"] == status


def test_a_last_line_without_its_end_is_answered() -> None:
    assert len(run("--lines", "-", fed=lines([0.5, 1.0]).rstrip(b"\n")).stdout.splitlines()) == 2


def test_nothing_to_read_is_nothing_to_answer() -> None:
    done = run("--lines", "-", fed=b"")
    assert (done.returncode, done.stdout) == (0, b"")


def send(process: subprocess.Popen[bytes], text: bytes) -> None:
    assert process.stdin is not None
    process.stdin.write(text)
    process.stdin.flush()


def next_line(process: subprocess.Popen[bytes]) -> bytes:
    assert process.stdout is not None
    return process.stdout.readline()


def test_each_line_is_answered_before_the_next_is_read() -> None:
    with started("--lines", "-") as process:
        for gain in (0.5, 1.0):
            send(process, lines([gain]))
            assert ideal_gain(json.loads(next_line(process))) == gain
        assert process.communicate(timeout=TIMEOUT_S) == (b"", b"")
    assert process.returncode == 0


def test_several_processes_answer_though_no_further_line_comes() -> None:
    with started("--lines", "-", "--jobs", "2") as process:
        send(process, lines([0.5] * 30))  # one chunk and the beginning of the next
        assert ideal_gain(json.loads(next_line(process))) == 0.5


@pytest.mark.parametrize("jobs", ["1", "2"])
def test_a_reader_that_has_seen_enough_ends_the_run_quietly(jobs: str) -> None:
    with started("--lines", "-", "--jobs", jobs) as process:
        send(process, lines([1.0] * 60))
        next_line(process)
        assert process.stdout is not None
        process.stdout.close()
        with suppress(BrokenPipeError):  # the command may have gone already, as it should
            send(process, lines([1.0] * 200))
        assert process.communicate(timeout=TIMEOUT_S)[1] == b""
    assert process.returncode == 1


@pytest.mark.parametrize("jobs", ["1", "2"])
def test_an_interrupt_ends_the_run_quietly(jobs: str) -> None:
    with started("--lines", "-", "--jobs", jobs) as process:
        send(process, lines([1.0] * 60))
        next_line(process)
        os.killpg(process.pid, signal.SIGINT)  # as a terminal does: the whole group
        assert process.wait(TIMEOUT_S) == 130
        assert process.stderr is not None
        assert process.stderr.read() == b""


def test_no_process_is_left_behind_when_the_command_is_killed() -> None:
    with started("--lines", "-", "--jobs", "2") as process:
        send(process, lines([1.0] * 60))
        next_line(process)
        process.kill()
        # every process of the run holds standard error: its end is reached when the last one has ended
        assert process.stderr is not None
        process.stderr.read()
    assert process.returncode == -signal.SIGKILL


@pytest.mark.parametrize("arguments", [[], ["--jobs", "0", "x"], ["no such file"], ["--lines"], ["--colour"]])
def test_arguments_that_say_nothing_are_refused_with_status_2(arguments: list[str]) -> None:
    done = run(*arguments)
    assert (done.returncode, done.stdout) == (2, b"")
    assert b"Error: " in done.stderr


def test_the_first_answer_comes_soon_from_a_cold_process(request_file: str) -> None:
    # time on the processor, the best of three: what the command needs, not what else the machine is doing
    assert min(seconds(request_file) for _ in range(3)) < COLD_START_S_MAX


def seconds(file: str) -> float:
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    assert run(file).returncode == 0
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


def test_neither_the_web_nor_the_database_is_loaded_to_recompute(request_file: str) -> None:
    watch = (
        "import sys; from service.command.main import main\n"
        f"try: main(['recompute', {request_file!r}])\n"
        "except SystemExit: pass\n"
        "heavy = {'flask', 'sqlalchemy', 'control', 'reportlab', 'concurrent.futures.process'}\n"
        "print(sorted(heavy & sys.modules.keys()), file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", watch], capture_output=True, cwd=ROOT, check=True)
    assert done.stderr.strip() == b"[]"


def test_the_help_lists_the_subjects_without_loading_any() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "service.command", "--help"], capture_output=True, cwd=ROOT, check=True
    )
    assert b"recompute" in done.stdout
