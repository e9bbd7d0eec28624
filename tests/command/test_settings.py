"""The environment as settings: what can be used, and what is refused in a sentence."""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner

from service.command.main import main
from service.settings import DEFAULT_DATABASE_URL, Settings, SettingsError

SECRETS = ["GAIN_SIGNOFF_SECRET_KEY", "GAIN_SIGNOFF_DATABASE_URL"]


def value(settings: Settings, name: str) -> str | None:
    return settings.secret_key if name == "GAIN_SIGNOFF_SECRET_KEY" else settings.database_url


def test_an_empty_environment_has_a_file_for_the_records_and_no_secret() -> None:
    settings = Settings.from_environment({})
    assert settings == Settings(database_url=DEFAULT_DATABASE_URL, secret_key=None)
    assert (settings.log_level, settings.log_format) == ("info", "json")


@pytest.mark.parametrize("name", SECRETS)
def test_a_secret_may_stand_in_a_file(tmp_path: Path, name: str) -> None:
    (tmp_path / "secret").write_text("sqlite:///kept.db\n")
    settings = Settings.from_environment({f"{name}_FILE": str(tmp_path / "secret")})
    assert value(settings, name) == "sqlite:///kept.db"


@pytest.mark.parametrize("name", SECRETS)
def test_a_secret_that_stands_in_two_places_is_refused(tmp_path: Path, name: str) -> None:
    (tmp_path / "secret").write_text("one")
    with pytest.raises(SettingsError, match=f"{name} and {name}_FILE"):
        Settings.from_environment({name: "another", f"{name}_FILE": str(tmp_path / "secret")})


@pytest.mark.parametrize("name", SECRETS)
@pytest.mark.parametrize("content", [None, b"\xff\xfe"], ids=["not there", "not UTF-8"])
def test_a_file_that_cannot_be_read_is_named(tmp_path: Path, name: str, content: bytes | None) -> None:
    if content is not None:
        (tmp_path / "secret").write_bytes(content)
    with pytest.raises(SettingsError, match=f"{name}_FILE names .*/secret, which cannot be read: "):
        Settings.from_environment({f"{name}_FILE": str(tmp_path / "secret")})


@pytest.mark.parametrize("name", ["GAIN_SIGNOFF_LOG_LEVEL", "GAIN_SIGNOFF_LOG_FORMAT"])
def test_a_word_that_is_none_of_the_choices_is_refused_with_the_choices(name: str) -> None:
    with pytest.raises(SettingsError, match=f"{name} is 'loud'; it is one of "):
        Settings.from_environment({name: "loud"})


def test_neither_secret_is_shown() -> None:
    shown = repr(Settings(database_url="postgresql://a:secret-one@b/c", secret_key="secret-two"))
    assert "secret-" not in shown


@pytest.mark.parametrize(
    "command", [["serve"], ["migrate"], ["history", "verify"], ["account", "list"], ["backup", "copy.db"]]
)
def test_every_command_tells_a_bad_setting_in_one_sentence(command: list[str]) -> None:
    ended = CliRunner().invoke(main, command, env={"GAIN_SIGNOFF_LOG_LEVEL": "loud"})
    assert ended.exit_code == 2
    assert ended.stderr == (
        "Error: GAIN_SIGNOFF_LOG_LEVEL is 'loud'; it is one of debug, info, warning, error\n"
    )
