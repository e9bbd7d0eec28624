"""The built wheel, installed into an environment of its own and used from another folder.

What the tree has and the wheel lacks (a template, a font, a migration, the demonstration's data) is seen here
and nowhere else. The examples of the README run with it, as they stand there.
"""

from __future__ import annotations

import contextlib
import json
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from zipfile import ZipFile

import pytest
from pypdf import PdfReader

from service.command.main import SUBJECTS

ROOT = Path(__file__).parents[2]
pytestmark = pytest.mark.xdist_group("wheel")


@dataclass(frozen=True)
class Installed:
    """The console command in its own environment, and a folder that is not the clone."""

    wheel: Path
    programs: Path
    folder: Path

    @property
    def environment(self) -> dict[str, str]:
        inherited = {n: v for n, v in os.environ.items() if not n.startswith(("GAIN_SIGNOFF_", "PYTHON"))}
        return {**inherited, "PATH": f"{self.programs}:{os.environ['PATH']}"}

    def run(self, *arguments: str, **variables: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [self.programs / "gain-signoff", *arguments],
            cwd=self.folder,
            env={**self.environment, **variables},
            capture_output=True,
            text=True,
            timeout=240,
        )


@pytest.fixture(scope="module")
def installed(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Installed]:
    place = tmp_path_factory.mktemp("installed")
    pip = [sys.executable, "-m", "pip", "--quiet", "--disable-pip-version-check"]
    subprocess.run([*pip, "wheel", "--no-deps", "--wheel-dir", place, ROOT], check=True)
    (wheel,) = place.glob("*.whl")
    # pip from outside, and nothing compiled that no test imports: half the files, half the time
    subprocess.run([sys.executable, "-m", "venv", "--without-pip", place / "venv"], check=True)
    install = ["--python", place / "venv/bin/python", "install", "--no-compile", wheel]
    subprocess.run([*pip, *install], check=True)
    yield Installed(wheel, place / "venv/bin", tmp_path_factory.mktemp("elsewhere"))
    shutil.rmtree(place)  # some hundred megabytes


def free_port() -> int:
    with socket.socket() as listener:
        listener.bind(("127.0.0.1", 0))
        return int(listener.getsockname()[1])


def shell_blocks() -> list[str]:
    text = (ROOT / "README.md").read_text("utf-8")
    return re.findall(r"^```sh\n(.*?)^```$", text, re.MULTILINE | re.DOTALL)


def follow(installed: Installed, folder: Path, block: str) -> str:
    """Run a block of the README in `folder`, in a process group of its own that is ended afterwards."""
    with (folder / "output.txt").open("w") as output:
        shell = subprocess.Popen(
            ["bash", "-euo", "pipefail", "-c", block],  # noqa: S607  the README asks for a shell
            cwd=folder,
            env=installed.environment,
            stdout=output,
            stderr=subprocess.STDOUT,
            start_new_session=True,
        )
        try:
            shell.wait(timeout=240)
        finally:
            # the service that the block left running
            with contextlib.suppress(ProcessLookupError):
                os.killpg(shell.pid, signal.SIGTERM)
    printed = (folder / "output.txt").read_text("utf-8")
    assert shell.returncode == 0, printed
    return printed


def test_the_wheel_holds_every_kept_file_of_the_service(installed: Installed) -> None:
    kept = subprocess.run(
        ["git", "ls-files", "service", "migrations"],  # noqa: S607  the README asks for git
        cwd=ROOT,
        check=True,
        capture_output=True,
        text=True,
    ).stdout.splitlines()
    with ZipFile(installed.wheel) as wheel:
        held = set(wheel.namelist())
    missing = [
        name for name in kept if re.sub("^migrations/", "service/records/migrations/", name) not in held
    ]
    assert missing == []


def test_the_installed_command_lists_what_it_can_do(installed: Installed) -> None:
    answer = installed.run("--help")
    assert answer.returncode == 0, answer.stderr
    assert re.findall(r"^  (\w+)  ", answer.stdout, re.MULTILINE) == sorted(SUBJECTS)


def test_the_readme_s_question_without_a_record_is_answered(installed: Installed, tmp_path: Path) -> None:
    answer = json.loads(follow(installed, tmp_path, shell_blocks()[1]))
    assert answer["verdict"] == "stable"


def test_the_first_submission_of_the_readme_is_approved_and_its_sheet_can_be_read(
    installed: Installed, tmp_path: Path
) -> None:
    block = shell_blocks()[0].replace("8000", str(free_port()))
    follow(installed, tmp_path, block)
    submission = json.loads((tmp_path / "submission.json").read_text("utf-8"))
    assert submission["state"] == "awaiting_review"
    pages = "\n".join(page.extract_text() for page in PdfReader(tmp_path / "sheet.pdf").pages)
    assert "TIC-101" in pages
    assert "Rut Lindqvarn" in pages
    assert "1.70" in pages


def test_the_installed_demonstration_has_a_whole_history(installed: Installed) -> None:
    store = f"sqlite:///{installed.folder / 'demonstration.db'}"
    made = installed.run("demo", "--only-data", GAIN_SIGNOFF_DATABASE_URL=store)
    assert made.returncode == 0, made.stderr
    verified = installed.run("history", "verify", GAIN_SIGNOFF_DATABASE_URL=store)
    assert verified.returncode == 0, verified.stdout + verified.stderr
