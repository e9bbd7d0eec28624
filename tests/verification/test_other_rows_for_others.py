"""In PostgreSQL the owner can show the service other rows than the verification: that is found too."""

from __future__ import annotations

import pytest

from service.verification.verifier import verify
from tests.databases import opened, run
from tests.verification.conftest import Owned

pytestmark = pytest.mark.parametrize("databases", ["postgresql"], indirect=True)


def test_a_schema_that_stands_before_the_stores_own(owned: Owned) -> None:
    # the first place where a role looks for a table is the schema of its own name
    owned.execute("CREATE SCHEMA gain_service", "CREATE VIEW gain_service.submissions AS SELECT 1 AS id")
    report = owned.verify()
    assert report.fault is not None
    assert report.fault.table == "submissions"
    assert "schema gain_service" in report.fault.what


@pytest.mark.parametrize("table", ["history_events", "history_head", "decisions"])
def test_row_security(owned: Owned, table: str) -> None:
    owned.execute(f"ALTER TABLE {table} ENABLE ROW LEVEL SECURITY")
    report = owned.verify()
    assert report.fault is not None
    assert (report.fault.table, report.fault.what) == (
        table,
        "row security decides who sees which of its rows",
    )


def test_a_rule(owned: Owned) -> None:
    owned.execute("CREATE RULE lost AS ON INSERT TO installations DO INSTEAD NOTHING")
    report = owned.verify()
    assert report.fault is not None
    assert (report.fault.table, report.fault.what) == ("installations", "a rule changes what is done to it")


def test_what_is_no_table_of_the_stores_does_not_alarm(owned: Owned) -> None:
    owned.execute("CREATE SCHEMA reports", "CREATE VIEW reports.all_loops AS SELECT id FROM public.loops")
    with opened(owned.url) as connection:
        # of this connection alone
        run(connection, "CREATE TEMPORARY TABLE submissions (id text)")
        assert verify(owned.url).holds
