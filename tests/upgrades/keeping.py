"""Keeping a store as it was written at one revision of the schema, and putting it into a database again.

`python -m tests.upgrades.keeping` writes the store of the present revision into `stores/`, named by the
revision. It is run once for each migration, when the migration is written, and its file is never changed: the
code that wrote it will be gone, and the stores that it wrote in plants will not.

A file has one row a line, tables in the order of their references. It says nothing of the kind of database.
"""

from __future__ import annotations

import base64
import json
import zlib
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from alembic import command
from sqlalchemy import Connection, MetaData, Table

from service.records import migrating
from tests.databases import opened, run
from tests.records.store import START, Store
from tests.records.year import live

FOLDER = Path(__file__).with_name("stores")
OF_ALEMBIC = "alembic_version"
HEAD = "history_head"


def file_of(revision: str) -> Path:
    return FOLDER / f"{revision}.jsonl"


def revision_of(url: str) -> str:
    with opened(url) as connection:
        ((revision,),) = run(connection, f"SELECT version_num FROM {OF_ALEMBIC}")  # noqa: S608
    return str(revision)


def keep(url: str) -> Path:
    """Write everything that stands in a store into the file of its revision."""
    file = file_of(revision_of(url))
    with opened(url) as connection, file.open("w", encoding="utf-8") as lines:
        for table in _tables(connection):
            for row in connection.execute(table.select()).mappings():
                plain = {name: _plain(value) for name, value in row.items()}
                lines.write(json.dumps({"table": table.name, "row": plain}, ensure_ascii=False) + "\n")
    return file


def put_back(revision: str, url: str) -> None:
    """Make the tables of `revision` in an empty database and fill them from its file."""
    with migrating.open_for_migration(url) as connection:
        config = migrating._config()
        config.attributes["connection"] = connection
        command.upgrade(config, revision)
    with opened(url) as connection:
        tables = {table.name: table for table in _tables(connection)}
        for name, row in _rows(revision):
            if name == HEAD:
                _move_head(connection, tables[name], row)
            else:
                connection.execute(tables[name].insert().values(row))


def _move_head(connection: Connection, head: Table, row: dict[str, Any]) -> None:
    # its guards let it move by one entry at a time, and they stay
    for size in range(1, row["size"] + 1):
        connection.execute(head.update().values(row | {"size": size}))


def _tables(connection: Connection) -> list[Table]:
    found = MetaData()
    found.reflect(connection)
    return [table for table in found.sorted_tables if table.name != OF_ALEMBIC]


def _rows(revision: str) -> Iterator[tuple[str, dict[str, Any]]]:
    with file_of(revision).open(encoding="utf-8") as lines:
        for line in lines:
            document = json.loads(line)
            yield document["table"], {name: _value(kept) for name, kept in document["row"].items()}


def _plain(value: Any) -> Any:
    if isinstance(value, (bytes, memoryview)):
        return {"zlib": base64.b64encode(zlib.compress(value, 9)).decode()}
    if isinstance(value, datetime):
        return {"time": (value if value.tzinfo else value.replace(tzinfo=UTC)).isoformat()}
    return value


def _value(kept: Any) -> Any:
    if isinstance(kept, dict):
        raw = kept.get("zlib")
        return zlib.decompress(base64.b64decode(raw)) if raw else datetime.fromisoformat(kept["time"])
    return kept


def main() -> None:
    """Keep a store that the present code writes at the present revision."""
    with TemporaryDirectory() as folder:
        url = f"sqlite:///{Path(folder) / 'store.db'}"
        migrating.migrate(url, now=START, demonstration=True)
        store = Store(url)
        store.add_people()
        live(store)
        store.database.close()
        print(keep(url))


if __name__ == "__main__":
    main()
