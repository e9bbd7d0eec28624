"""The key that signs checkpoints, from the command line: made, taken up by the service, changed."""

from __future__ import annotations

import json
import shlex
import stat
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from service.app import create_app
from service.command.main import main
from service.context import services
from service.documents import writing
from service.issuing.checkpoints import checkpoint
from service.records import migrating
from service.records.database import system_clock
from service.settings import Settings
from tests.databases import Databases

README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")
SECRET_KEY = "a secret of the tests, of 32 bytes or more"
Run = Callable[..., Result]


@pytest.fixture
def url(databases: Databases) -> Iterator[str]:
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    yield url
    databases.drop(url)


@pytest.fixture
def run(url: str, monkeypatch: pytest.MonkeyPatch) -> Run:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", url)
    return lambda *arguments: CliRunner().invoke(main, list(map(str, arguments)))


def checkpoint_of_the_service(url: str, key: Path, place: Path) -> Path:
    """Start the service with a key and keep the checkpoint that it gives."""
    app = create_app(Settings(database_url=url, secret_key=SECRET_KEY, signing_key_file=key))
    with app.app_context():
        with services().database.reading() as session:
            place.write_bytes(writing.to_bytes(checkpoint(session, services().signing_key)))
        services().database.close()
    return place


def test_a_key_is_made_once_and_for_its_owner_alone(run: Run, tmp_path: Path) -> None:
    file = tmp_path / "key.pem"
    made = run("key", "make", file)
    assert made.exit_code == 0, made.stderr
    assert stat.S_IMODE(file.stat().st_mode) == 0o600
    assert run("key", "show", file).stdout == made.stdout
    again = run("key", "make", file)
    assert (again.exit_code, "File exists" in again.stderr) == (2, True)


def test_a_checkpoint_is_checked_with_the_key_that_was_handed_over(
    run: Run, url: str, tmp_path: Path
) -> None:
    public = run("key", "make", tmp_path / "key.pem").stdout.strip()
    held = checkpoint_of_the_service(url, tmp_path / "key.pem", tmp_path / "checkpoint.json")
    result = run("history", "verify", "--checkpoint", held, "--public-key", public)
    assert (result.exit_code, result.stderr) == (0, "")
    assert "Note" not in result.stdout
    other = run("key", "make", tmp_path / "other.pem").stdout.strip()
    assert run("history", "verify", "--checkpoint", held, "--public-key", other).exit_code == 1


def test_after_a_change_both_checkpoints_hold_and_an_export_says_the_same(
    run: Run, url: str, tmp_path: Path
) -> None:
    old, new = tmp_path / "old.pem", tmp_path / "new.pem"
    public = run("key", "make", old).stdout.strip()
    run("key", "make", new)
    before = checkpoint_of_the_service(url, old, tmp_path / "before.json")
    changed = run("key", "change", "--old", old, "--new", new, "--reason", "yearly change")
    assert changed.exit_code == 0, changed.stderr
    after = checkpoint_of_the_service(url, new, tmp_path / "after.json")
    assert json.loads(after.read_text())["public_key"] != json.loads(before.read_text())["public_key"]
    export = tmp_path / "export.jsonl"
    assert run("history", "export", export).exit_code == 0
    for held in (before, after):
        for more in ((), ("--export", export)):
            result = run("history", "verify", "--checkpoint", held, "--public-key", public, *more)
            assert result.exit_code == 0, result.stderr


def test_the_commands_of_the_readme_run_in_their_order(
    run: Run, url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    block = README.partition("tests/command/test_key.py runs this block. -->\n```\n")[2].partition("```")[0]
    public, commands = "", [line for line in block.splitlines() if line.startswith(("gain-signoff", "curl"))]
    assert len(commands) == 7
    for line in commands:
        if line.startswith("curl"):
            checkpoint_of_the_service(url, Path("signing.pem"), Path("checkpoint.json"))
            continue
        _, *arguments = shlex.split(line.replace("PUBLIC_KEY", public), comments=True)
        result = run(*arguments)
        assert result.exit_code == 0, (line, result.stderr)
        public = public or result.stdout.strip()


def test_mistakes_are_said_in_one_sentence(run: Run, tmp_path: Path) -> None:
    run("key", "make", tmp_path / "key.pem")
    for arguments in (
        ("--new", tmp_path / "key.pem"),
        ("--new", tmp_path / "key.pem", "--old", tmp_path / "none.pem"),
        ("--new", tmp_path / "key.pem", "--old-is-lost"),
    ):
        refused = run("key", "change", *arguments, "--reason", "x")
        assert (refused.exit_code, refused.stderr.count("\n")) == (2, 1), refused.stderr
