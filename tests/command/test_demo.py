"""The store of the demonstration, as far as the command makes it; the year in it is tried elsewhere."""

from __future__ import annotations

from pathlib import Path

import pytest

from service.command import demo
from service.issuing.checkpoints import read_key


def test_a_temporary_store_has_a_signing_key_of_its_own_and_is_removed_with_it(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    monkeypatch.delenv("GAIN_SIGNOFF_DATABASE_URL", raising=False)
    with demo._store(keep=False) as settings:
        assert settings.signing_key_file is not None
        assert settings.signing_key_file.parent.parent == tmp_path
        assert read_key(settings.signing_key_file)
    assert list(tmp_path.iterdir()) == []


def test_a_store_that_is_named_gets_no_key(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("GAIN_SIGNOFF_DATABASE_URL", f"sqlite:///{tmp_path / 'store.db'}")
    monkeypatch.delenv("GAIN_SIGNOFF_SIGNING_KEY_FILE", raising=False)
    with demo._store(keep=True) as settings:
        assert settings.signing_key_file is None
