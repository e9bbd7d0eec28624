"""A store made, people added and tokens issued from the command line, with mistakes told in one sentence."""

from __future__ import annotations

import shlex
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from psycopg import sql

from service.command.main import SUBJECTS, main
from service.records import tokens
from service.records.database import Database
from tests.clusters import Cluster
from tests.databases import Databases, file_of, is_sqlite

Run = Callable[..., Result]
PASSWORD = "seven wet bicycles\n"
REVIEWER = ("account", "add", "ines", "--full-name", "Ines Okafor", "--role", "reviewer")


@pytest.fixture
def url(databases: Databases) -> Iterator[str]:
    url = databases.new()
    yield url
    databases.drop(url)


@pytest.fixture
def run(url: str, monkeypatch: pytest.MonkeyPatch) -> Run:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", url)

    def command(*arguments: str, standard_input: str = "") -> Result:
        return CliRunner().invoke(main, arguments, input=standard_input)

    return command


@pytest.fixture
def store(run: Run) -> Run:
    assert run("migrate").exit_code == 0
    return run


def refused_in_one_sentence(result: Result) -> str:
    """Return the sentence on standard error of a command that did nothing."""
    assert result.exit_code == 2
    assert result.stdout == ""
    assert isinstance(result.exception, SystemExit)
    assert result.stderr.count("\n") == 1
    return result.stderr.strip()


def test_migrating_twice_is_once(run: Run) -> None:
    assert run("migrate").stdout == run("migrate").stdout == "The database is at the current schema.\n"


def test_an_account_can_use_the_token_that_was_issued_for_it(store: Run, url: str) -> None:
    added = store(*REVIEWER, "--role", "submitter", "--area", "Washing", standard_input=PASSWORD)
    assert added.exit_code == 0, added.stderr
    issued = store("token", "issue", "ines", "--note", "bench")
    assert issued.stdout.count("\n") == 1
    database = Database.open(url)
    with database.reading() as session:
        actor = tokens.authenticate(session, issued.stdout.strip(), database.now()).actor
    database.close()
    assert (actor.name, actor.full_name) == ("ines", "Ines Okafor")
    assert (actor.roles, actor.areas) == ({"reviewer", "submitter"}, {"Washing"})


def test_the_password_is_never_shown(store: Run) -> None:
    added = store(*REVIEWER, standard_input=PASSWORD)
    assert PASSWORD.strip() not in added.output


def test_a_listed_token_can_be_revoked_by_its_identifier(store: Run) -> None:
    store(*REVIEWER, standard_input=PASSWORD)
    text = store("token", "issue", "ines", "--note", "bench").stdout.strip()
    listed = store("token", "list", "ines").stdout
    identifier, name, state, *_, note = listed.strip().split("\t")
    assert (name, state, note) == ("ines", "valid", "bench")
    assert text not in listed
    assert store("token", "revoke", identifier, "--reason", "lost").exit_code == 0
    assert "revoked" in store("token", "list").stdout


@pytest.mark.parametrize(
    ("arguments", "standard_input", "words"),
    [
        (REVIEWER, "", "password"),
        (REVIEWER, "short\n", "15"),
        (("account", "add", "console", *REVIEWER[3:]), PASSWORD, "taken"),
        (("token", "issue", "nobody", "--note", "bench"), "", "no such account"),
        (("account", "close", "nobody", "--reason", "left"), "", "no such account"),
        (("account", "rename", "nobody", "--full-name", "N", "--reason", "married"), "", "no such account"),
        (("account", "access", "nobody", "--role", "auditor", "--reason", "moved"), "", "no such account"),
        (("account", "reset-password", "nobody", "--reason", "lost"), PASSWORD, "no such account"),
        (("account", "reset-password", "nobody", "--reason", "lost"), "", "password"),
        (("token", "revoke", "unknown", "--reason", "lost"), "", "no such"),
    ],
)
def test_a_mistake_is_one_sentence_on_standard_error(
    store: Run, arguments: tuple[str, ...], standard_input: str, words: str
) -> None:
    assert words in refused_in_one_sentence(store(*arguments, standard_input=standard_input))


def test_a_name_is_never_used_twice(store: Run) -> None:
    store(*REVIEWER, standard_input=PASSWORD)
    assert "taken" in refused_in_one_sentence(store(*REVIEWER, standard_input=PASSWORD))


def test_a_store_that_was_never_made_is_said_and_none_is_made(
    run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", f"sqlite:///{tmp_path / 'store.db'}")
    assert "gain-signoff migrate" in refused_in_one_sentence(run("token", "list"))
    assert list(tmp_path.iterdir()) == []


def test_a_store_of_another_schema_is_said(run: Run, url: str) -> None:
    if is_sqlite(url):
        file_of(url).touch()
    assert "gain-signoff migrate" in refused_in_one_sentence(run("token", "list"))


def test_accounts_are_listed_with_what_they_may(store: Run) -> None:
    store(*REVIEWER, "--area", "Washing", standard_input=PASSWORD)
    line = store("account", "list").stdout.strip().split("\t")
    assert line == ["ines", "Ines Okafor", "reviewer", "Washing", "open", "never used"]
    assert store("account", "list", "--unused").stdout == ""


def test_roles_areas_and_name_are_changed_with_a_reason(store: Run) -> None:
    store(*REVIEWER, standard_input=PASSWORD)
    changed = store("account", "access", "ines", "--role", "auditor", "--area", "Drying", "--reason", "moved")
    assert changed.stdout == "ines is auditor in Drying.\n"
    renamed = store("account", "rename", "ines", "--full-name", "Ines Lind", "--reason", "married")
    assert renamed.stdout == "ines is Ines Lind.\n"
    line = store("account", "list").stdout.strip().split("\t")
    assert line[:4] == ["ines", "Ines Lind", "auditor", "Drying"]


def test_a_reset_suspends_signing_and_the_console_cannot_confirm_it(store: Run) -> None:
    store(*REVIEWER, standard_input=PASSWORD)
    new = "nine dry bicycles\n"
    reset = store("account", "reset-password", "ines", "--reason", "forgotten", standard_input=new)
    assert reset.exit_code == 0
    assert new.strip() not in reset.output
    assert "signs nothing until its reset is confirmed" in store("account", "list").stdout


def test_a_closed_account_stays_in_the_list(store: Run) -> None:
    store(*REVIEWER, standard_input=PASSWORD)
    assert store("account", "close", "ines", "--reason", "left").stdout == "Closed ines.\n"
    assert "closed" in store("account", "list").stdout


def test_the_readmes_commands_about_people_run(store: Run) -> None:
    maud = ("account", "add", "maud", "--full-name", "Maud Tavener", "--role", "submitter")
    store(*maud, standard_input=PASSWORD)
    readme = (Path(__file__).parents[2] / "README.md").read_text(encoding="utf-8")
    _, _, after = readme.partition("<!-- tests/command/test_people.py runs this block. -->\n```sh\n")
    lines = after.partition("```")[0].splitlines()
    assert len(lines) == 5
    for line in lines:
        said, _, command = line.rpartition(" | ")
        typed = f"{shlex.split(said)[1]}\n" if said else ""
        done = store(*shlex.split(command, comments=True)[1:], standard_input=typed)
        assert done.exit_code == 0, (line, done.stderr)


@pytest.mark.parametrize("subject", SUBJECTS)
def test_every_command_in_the_list_is_there(run: Run, subject: str) -> None:
    shown = run(subject, "--help")
    assert shown.exit_code == 0
    assert shown.stdout.startswith("Usage: ")


def test_a_store_that_cannot_be_reached_is_said_without_its_password(
    run: Run, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", "sqlite:////nowhere/at/all.db")
    assert "unable to open database file" in refused_in_one_sentence(run("migrate"))


def test_what_postgresql_says_of_a_role_without_rights_is_one_sentence(
    cluster: Cluster, monkeypatch: pytest.MonkeyPatch, run: Run
) -> None:
    cluster.administer(sql.SQL("CREATE ROLE powerless LOGIN"))
    name = cluster.create()
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", cluster.url(name, "powerless"))
    assert "permission denied" in refused_in_one_sentence(run("migrate"))
    cluster.drop(name)
    cluster.administer(sql.SQL("DROP ROLE powerless"))


def test_a_role_that_does_not_exist_is_refused(store: Run) -> None:
    result = store("account", "add", "ines", "--full-name", "Ines Okafor", "--role", "king")
    assert result.exit_code == 2
    assert "submitter" in result.stderr
