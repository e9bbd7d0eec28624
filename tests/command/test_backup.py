"""Backup and restore, tried as a drill: the store is lost, comes back, and its history is verified."""

from __future__ import annotations

import json
import os
import re
import stat
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from psycopg import sql
from sqlalchemy.exc import DBAPIError

from service.command.main import main
from service.documents import writing
from service.issuing import checkpoints
from service.records import backup, migrating
from service.records.database import Database
from service.verification.verifier import verify
from tests.clusters import Cluster, program
from tests.databases import SqliteFiles, file_of, opened, run, without_guards
from tests.records.store import START, Store, gains
from tests.records.year import live

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text("utf-8")
BACKUP = README.partition("## Backup and restore")[2].partition("\n## ")[0]


def readme_block(beginning: str) -> str:
    """The block of the section on backup that begins so."""
    (block,) = re.findall(rf"^```\n({re.escape(beginning)} .*?)^```$", BACKUP, re.MULTILINE | re.DOTALL)
    return str(block)


def readme(command: str, **places: Path) -> list[str]:
    """The arguments that the README gives to the command, each with what stands in its place."""
    words = readme_block(f"gain-signoff {command}").split()[1:]
    return [str(places.get(word, word)) for word in words]


def readme_sql() -> list[str]:
    """The statements that set a PostgreSQL database up."""
    (block,) = re.findall(r"^```sql\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    return [statement.strip() for statement in block.split(";") if statement.strip()]


def gain_signoff(url: str, *arguments: str) -> Result:
    return CliRunner().invoke(main, arguments, env={"GAIN_SIGNOFF_DATABASE_URL": url})


def lived_in(url: str) -> None:
    migrating.migrate(url, now=START, demonstration=True)
    live_in(url)


def live_in(url: str) -> None:
    store = Store(url)
    store.add_people()
    live(store)
    store.database.close()


def work_on(url: str) -> None:
    """Record something after the backup."""
    store = Store(url)
    store.clock.forward(days=60)
    loop = store.register(tag="FIC-990")
    store.add_model(loop)
    store.submit(controller=gains(1.2), loop={"site": "North", "tag": "FIC-990"})
    store.database.close()


def checkpoint_of(url: str, file: Path) -> Path:
    database = Database.open(url)
    with database.reading() as session:
        file.write_bytes(writing.to_bytes(checkpoints.checkpoint(session, None)))
    database.close()
    return file


def check_the_history_after_a_restore(url: str, at_backup: Path, later: Path) -> None:
    """It holds, also against a checkpoint of the backup's time; a later one shows that its end is lost."""
    assert gain_signoff(url, "history", "verify").exit_code == 0
    assert gain_signoff(url, "history", "verify", "--checkpoint", str(at_backup)).exit_code == 0
    seen = gain_signoff(url, "history", "verify", "--checkpoint", str(later))
    assert seen.exit_code == 1
    assert "checkpoint" in seen.stderr


def test_a_sqlite_store_comes_back_and_a_later_checkpoint_shows_what_is_lost(tmp_path: Path) -> None:
    url = SqliteFiles(tmp_path).new()
    lived_in(url)
    file = tmp_path / "backup"
    made = gain_signoff(url, *readme("backup", FILE=file))
    assert made.exit_code == 0, made.stderr
    at_backup = checkpoint_of(url, tmp_path / "then.json")
    # what is printed is enough of a checkpoint to be noted by hand
    assert json.loads(at_backup.read_text())["digest"] in made.stdout
    work_on(url)
    later = checkpoint_of(url, tmp_path / "later.json")
    for left in tmp_path.glob(f"{file_of(url).name}*"):
        left.unlink()
    restored = gain_signoff(url, *readme("restore", FILE=file))
    assert restored.exit_code == 0, restored.stderr
    assert stat.S_IMODE(file_of(url).stat().st_mode) == 0o600
    check_the_history_after_a_restore(url, at_backup, later)
    work_on(url)
    assert gain_signoff(url, "history", "verify").exit_code == 0


def test_a_postgresql_store_comes_back_with_its_roles_and_a_later_checkpoint_shows_what_is_lost(
    own_cluster: Cluster, tmp_path: Path
) -> None:
    url, owner = (
        own_cluster.url("gain_signoff", "gain_service"),
        own_cluster.url("gain_signoff", "gain_owner"),
    )
    for statement in readme_sql():
        own_cluster.administer(sql.SQL(statement))
    migrating.migrate(owner, now=START, demonstration=True, service_role="gain_service")
    live_in(url)
    shell(own_cluster, tmp_path, readme_block("pg_dump"))
    at_backup = checkpoint_of(url, tmp_path / "then.json")
    work_on(url)
    later = checkpoint_of(url, tmp_path / "later.json")

    own_cluster.drop("gain_signoff")
    for statement in readme_sql():
        if not statement.startswith("CREATE ROLE"):
            own_cluster.administer(sql.SQL(statement))
    shell(own_cluster, tmp_path, readme_block("pg_restore"))
    check_the_history_after_a_restore(url, at_backup, later)
    work_on(url)
    assert gain_signoff(url, "history", "verify").exit_code == 0
    for user, kept_by in ((url, "permission denied"), (owner, "history_events")):
        with opened(user) as connection, pytest.raises(DBAPIError, match=kept_by):
            run(connection, "UPDATE history_events SET actor = 'other'")


def test_a_backup_during_work_is_one_moment_of_the_store(tmp_path: Path) -> None:
    url = SqliteFiles(tmp_path).new()
    migrating.migrate(url, now=START, demonstration=True)
    store, over = Store(url), threading.Event()
    store.add_people()

    def work() -> None:
        number = 0
        while not over.is_set():
            store.register(tag=f"FIC-{number}")
            number += 1

    worker = threading.Thread(target=work)
    worker.start()
    try:
        for number in range(3):
            backup.copy(file_of(url), tmp_path / f"backup_{number}")
    finally:
        over.set()
        worker.join()
        store.database.close()
    reports = [verify(f"sqlite:///{tmp_path / f'backup_{number}'}") for number in range(3)]
    assert [report.fault for report in reports] == [None] * 3
    assert reports[0].entries < reports[2].entries
    assert not list(tmp_path.glob("backup_*[-.]*")), "a backup is one file"


def test_nothing_is_written_over(tmp_path: Path) -> None:
    url = SqliteFiles(tmp_path).new()
    migrating.migrate(url, now=START)
    file = tmp_path / "backup"
    assert gain_signoff(url, "backup", str(file)).exit_code == 0
    before = file.read_bytes(), file_of(url).read_bytes()
    for command in ("backup", "restore"):
        refused = gain_signoff(url, command, str(file))
        assert refused.exit_code == 2
        assert "is there already" in refused.stderr
    assert (file.read_bytes(), file_of(url).read_bytes()) == before


def test_what_another_store_left_beside_is_not_played_into_the_restored_one(tmp_path: Path) -> None:
    url = SqliteFiles(tmp_path).new()
    migrating.migrate(url, now=START)
    file = tmp_path / "backup"
    assert gain_signoff(url, "backup", str(file)).exit_code == 0
    file_of(url).unlink()
    file_of(url).with_name(f"{file_of(url).name}-wal").write_bytes(b"left over")
    refused = gain_signoff(url, "restore", str(file))
    assert refused.exit_code == 2
    assert "-wal is left of another store" in refused.stderr


def test_a_tampered_backup_is_named_when_it_is_restored(tmp_path: Path) -> None:
    url = SqliteFiles(tmp_path).new()
    lived_in(url)
    file = tmp_path / "backup"
    assert gain_signoff(url, "backup", str(file)).exit_code == 0
    without_guards(f"sqlite:///{file}", "UPDATE submissions SET reason = 'another'")
    ended = gain_signoff(SqliteFiles(tmp_path / "elsewhere").new(), "restore", str(file))
    assert ended.exit_code == 2, "the folder is not there"
    ended = gain_signoff(f"sqlite:///{tmp_path / 'again.db'}", "restore", str(file))
    assert ended.exit_code == 1
    assert "its history does not hold" in ended.stderr


@pytest.mark.parametrize("content", [b"", b"no database at all"])
def test_what_is_no_store_is_not_restored_as_one(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "backup").write_bytes(content)
    ended = gain_signoff(f"sqlite:///{tmp_path / 'new.db'}", "restore", str(tmp_path / "backup"))
    assert ended.exit_code in (1, 2)
    assert isinstance(ended.exception, SystemExit)
    assert "does not hold" in ended.stderr or "cannot be copied" in ended.stderr


@pytest.mark.parametrize("url", ["no address", "sqlite://", "sqlite:///not-there.db"])
def test_a_store_that_is_none_is_told_in_one_sentence(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, url: str
) -> None:
    monkeypatch.chdir(tmp_path)
    ended = gain_signoff(url, "backup", "copy")
    assert ended.exit_code == 2
    assert ended.stderr.startswith("Error: ")
    assert ended.stderr.count("\n") == 1
    assert list(tmp_path.iterdir()) == []


def test_with_postgresql_both_say_which_programs_do_it() -> None:
    for command in ("backup", "restore"):
        ended = gain_signoff("postgresql+psycopg://a@/b", command, __file__)
        assert ended.exit_code == 2
        assert "pg_dump and pg_restore" in ended.stderr


def shell(cluster: Cluster, folder: Path, block: str) -> None:
    """Run a block of the README at this server, with this very command in the place of the installed one."""
    (folder / "gain-signoff").write_text(f'#!/bin/sh\nexec {sys.executable} -m service.command "$@"\n')
    (folder / "gain-signoff").chmod(0o755)
    place = f"gain_owner@/gain_signoff?host={cluster.folder}"
    block = block.replace("gain_owner@HOST/gain_signoff", place)
    block = block.replace("HOST", str(cluster.folder)).replace("FILE", "gain.dump")
    programs = f"{folder}:{Path(program('pg_dump')).parent}:{os.environ['PATH']}"
    done = subprocess.run(
        ["sh", "-euc", block],  # noqa: S607  the README asks for a shell
        cwd=folder,
        env=os.environ | {"PATH": programs, "PYTHONPATH": str(ROOT), "PYTHONDONTWRITEBYTECODE": "1"},
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert done.returncode == 0, done.stderr
