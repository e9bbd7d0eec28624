"""The scripts that the containers run, on a real server and with real files."""

from __future__ import annotations

import base64
import hashlib
import hmac
import os
import re
import stat
import subprocess
import sys
from pathlib import Path

import psycopg
import pytest

from service.verification.verifier import verify
from tests.clusters import Cluster, program
from tests.command.test_serve import serving

ROOT = Path(__file__).parents[2]
DOCKER = ROOT / "docker"


@pytest.fixture
def secrets(tmp_path: Path) -> Path:
    made = subprocess.run(
        ["sh", DOCKER / "make-secrets.sh", tmp_path / "secrets"],  # noqa: S607  whichever shell stands on PATH
        capture_output=True,
        text=True,
        check=False,
    )
    assert made.returncode == 0, made.stderr
    (public,) = re.findall(r"^[A-Za-z0-9+/]{43}=$", made.stdout, re.MULTILINE)
    (tmp_path / "public").write_text(public)
    return tmp_path / "secrets"


@pytest.mark.parametrize("script", sorted(DOCKER.glob("*.sh")), ids=lambda script: script.name)
def test_a_script_can_be_read_by_any_shell_and_run(script: Path) -> None:
    checked = subprocess.run(["sh", "-n", script], capture_output=True, check=False)  # noqa: S607
    assert checked.stderr == b""
    # PostgreSQL's image reads a script that it cannot run into its own shell
    assert os.access(script, os.X_OK)


def test_every_secret_is_new_and_for_its_owner_alone(secrets: Path) -> None:
    files = sorted(secrets.iterdir())
    assert {stat.S_IMODE(file.stat().st_mode) for file in files} == {0o400}
    assert len({file.read_bytes() for file in files}) == len(files)
    assert all(len(file.read_bytes()) >= 64 for file in files)
    again = subprocess.run(
        ["sh", DOCKER / "make-secrets.sh", secrets],  # noqa: S607
        capture_output=True,
        check=False,
    )
    assert again.returncode != 0


def test_roles_migration_and_service_work_together_with_the_files_made_for_them(
    own_cluster: Cluster, secrets: Path, tmp_path: Path
) -> None:
    programs = f"{Path(program('initdb')).parent}:{os.environ['PATH']}"
    server = {"PGHOST": str(own_cluster.folder), "PATH": programs, "SECRETS": str(secrets)}
    made = subprocess.run(
        [DOCKER / "database-roles.sh"], env=os.environ | server, capture_output=True, text=True, check=False
    )
    assert made.returncode == 0, made.stderr
    urls = {
        role: _here(secrets / f"{role}_database_url", own_cluster, tmp_path) for role in ("owner", "service")
    }
    keys = {
        "GAIN_SIGNOFF_SECRET_KEY_FILE": str(secrets / "secret_key"),
        "GAIN_SIGNOFF_SIGNING_KEY_FILE": str(secrets / "signing_key.pem"),
    }
    own = {"PYTHONUNBUFFERED": "1", "PYTHONDONTWRITEBYTECODE": "1"}
    migrated = subprocess.run(
        [sys.executable, "-m", "service.command", "migrate", "--service-role", "gain_service"],
        env=os.environ | own | {"GAIN_SIGNOFF_DATABASE_URL_FILE": str(urls["owner"])},
        capture_output=True,
        text=True,
        check=False,
    )
    assert migrated.returncode == 0, migrated.stderr
    environment = os.environ | own | keys | {"GAIN_SIGNOFF_DATABASE_URL_FILE": str(urls["service"])}
    with serving(environment) as (_, _, port):
        assert _healthy(port)
    assert not _healthy(port)
    report = verify(urls["owner"].read_text(), held_key=(tmp_path / "public").read_text())
    assert report.fault is None
    for role in ("owner", "service"):
        assert _is_password_of(own_cluster, f"gain_{role}", (secrets / f"{role}_password").read_bytes())
        assert (secrets / f"{role}_password").read_text() in urls[role].read_text()


def _is_password_of(cluster: Cluster, role: str, password: bytes) -> bool:
    """Whether the server took this password for the role. Source of the formula: RFC 5802, section 3."""
    with psycopg.connect(f"host={cluster.folder} dbname=gain_signoff user=postgres") as connection:
        query = "SELECT rolpassword FROM pg_authid WHERE rolname = %s"
        (kept,) = connection.execute(query, [role]).fetchone() or ("",)
    rounds, salt, stored_key = re.findall(r"SCRAM-SHA-256\$(\d+):([^$]+)\$([^:]+):", kept)[0]
    salted = hashlib.pbkdf2_hmac("sha256", password, base64.b64decode(salt), int(rounds))
    client_key = hmac.digest(salted, b"Client Key", "sha256")
    return hashlib.sha256(client_key).digest() == base64.b64decode(stored_key)


def _here(file: Path, cluster: Cluster, folder: Path) -> Path:
    """The address of the file, with the tests' server in the place of the container's."""
    url = file.read_text("utf-8")
    assert "@database/gain_signoff" in url
    made = folder / file.name
    made.write_text(url.replace("@database/gain_signoff", f"@/gain_signoff?host={cluster.folder}"))
    return made


def _healthy(port: int) -> bool:
    checked = subprocess.run([sys.executable, DOCKER / "ready.py", str(port)], check=False)
    return checked.returncode == 0
