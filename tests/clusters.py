"""A real PostgreSQL server of the tests' own: in a temporary folder, reached by its Unix socket alone.

PostgreSQL refuses to run as root. Where the tests do, it runs as the system's user `postgres`, in a folder
that this user may enter: pytest's own temporary folders are root's alone.
"""

from __future__ import annotations

import itertools
import os
import shutil
import signal
import subprocess
import tempfile
import time
from dataclasses import dataclass, field
from pathlib import Path

import psycopg
from psycopg import sql

SUPERUSER = "postgres"
FOLDERS = ("/usr/lib/postgresql", "/usr/local/pgsql", "/opt/homebrew/opt/postgresql")
NOT_DURABLE = ("fsync=off", "synchronous_commit=off", "full_page_writes=off")
"""For tests that nobody kills: what they lose at a power cut is thrown away anyway."""

IN_MEMORY = Path("/dev/shm")  # noqa: S108  a file system, where there is one; the folder in it is our own
IN_MEMORY_BYTES_MIN = 2**30
START_S_MAX = 60.0


def program(name: str) -> str:
    """The newest server program of this name; Debian keeps them out of PATH, a folder a version."""
    found = [path for folder in FOLDERS for path in Path(folder).glob(f"**/bin/{name}")]
    on_path = shutil.which(name)
    if not found and on_path is None:
        raise FileNotFoundError(
            f"PostgreSQL's {name} is missing; the tests need the server, and skip nothing"
        )
    return str(max(found, key=_version)) if found else str(on_path)


def in_memory() -> Path | None:
    """A file system in memory with room enough, on which a database is copied in a tenth of the time."""
    if not IN_MEMORY.is_dir() or shutil.disk_usage(IN_MEMORY).free < IN_MEMORY_BYTES_MIN:
        return None
    return IN_MEMORY


def _version(path: Path) -> int:
    numbers = [int(part) for part in path.parts if part.isdecimal()]
    return max(numbers, default=0)


@dataclass
class Cluster:
    """A server with its data. `durable`: every commit reaches the disk, as in a plant."""

    durable: bool = False
    folder: Path = field(init=False)
    _server: subprocess.Popen[bytes] | None = field(default=None, init=False)
    _numbers: itertools.count[int] = field(default_factory=itertools.count, init=False)

    def __post_init__(self) -> None:
        place = None if self.durable else in_memory()
        self.folder = Path(tempfile.mkdtemp(prefix="gain-signoff-", dir=place))
        if self._user is not None:
            shutil.chown(self.folder, self._user, self._user)
        self._make_data(f"--username={SUPERUSER}", "--auth=trust", "--encoding=UTF8", "--no-locale")
        self.start()

    @property
    def _user(self) -> str | None:
        """Whom the server runs as; None: whoever runs the tests."""
        return "postgres" if os.geteuid() == 0 else None

    @property
    def _data(self) -> Path:
        return self.folder / "data"

    def _make_data(self, *options: str) -> None:
        command = [program("initdb"), f"--pgdata={self._data}", "--no-sync", *options]
        done = subprocess.run(
            command, user=self._user, group=self._user, cwd=self.folder, capture_output=True, check=False
        )
        assert done.returncode == 0, done.stderr.decode()

    def start(self) -> None:
        """Start the server and wait until it answers."""
        settings = [
            "listen_addresses=",
            f"unix_socket_directories={self.folder}",
            "max_connections=120",
            "shared_buffers=32MB",
            "autovacuum=off",
            "log_min_messages=fatal",
            *(() if self.durable else NOT_DURABLE),
        ]
        options = [part for setting in settings for part in ("-c", setting)]
        self._server = subprocess.Popen(
            [program("postgres"), "-D", str(self._data), *options],
            user=self._user,
            group=self._user,
            cwd=self.folder,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        self._wait()

    def _wait(self) -> None:
        deadline = time.monotonic() + START_S_MAX
        while True:
            try:
                psycopg.connect(self._conninfo("postgres")).close()
                return
            except psycopg.OperationalError:
                assert self._server is not None
                assert self._server.poll() is None, "the server ended while it started"
                assert time.monotonic() < deadline, "the server does not answer"
                time.sleep(0.05)

    def stop(self, how: signal.Signals = signal.SIGINT) -> None:
        """Stop the server. SIGINT: in good order; SIGQUIT: at once, as at a fault, without a checkpoint."""
        if self._server is not None:
            self._server.send_signal(how)
            self._server.wait(timeout=START_S_MAX)
            self._server = None

    def remove(self) -> None:
        """Stop the server and delete everything."""
        self.stop(signal.SIGQUIT)
        shutil.rmtree(self.folder)

    def url(self, database: str, user: str = SUPERUSER) -> str:
        """The address of a database as the settings take it."""
        return f"postgresql+psycopg://{user}@/{database}?host={self.folder}"

    def create(self, template: str | None = None) -> str:
        """Make a database, empty or as a copy of another that nobody is connected to; return its name."""
        name = f"store_{next(self._numbers)}"
        made = sql.SQL("CREATE DATABASE {}").format(sql.Identifier(name))
        if template is not None:
            made += sql.SQL(" TEMPLATE {} STRATEGY FILE_COPY").format(sql.Identifier(template))
        self.administer(made)
        return name

    def drop(self, name: str) -> None:
        """Delete a database, whoever is connected to it."""
        self.administer(sql.SQL("DROP DATABASE IF EXISTS {} WITH (FORCE)").format(sql.Identifier(name)))

    def administer(self, statement: sql.Composable) -> None:
        """Run one statement as the superuser, outside every transaction."""
        with psycopg.connect(self._conninfo("postgres"), autocommit=True) as connection:
            connection.execute(statement)

    def _conninfo(self, database: str) -> str:
        return f"host={self.folder} dbname={database} user={SUPERUSER}"
