"""The tables, as SQLite and PostgreSQL share them.

Lives here: mapped classes, a module a subject, and their column types. May import: sqlalchemy. Must never
know: what the rows mean to anyone; that is in the modules beside this package.

Three kinds of table: the history; kept tables, whose rows are inserted once, each with the entry of the
history that vouches for it; and working tables (accounts, tokens, sessions, throttles, idempotency keys),
which change.
"""
