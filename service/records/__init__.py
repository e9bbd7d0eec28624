"""What is kept, and who signed it.

Lives here: the tables, the one transaction round a request, accounts and signing, loops with their
revisions and models, submissions, decisions, installations, the life cycle as a table, the history of
events. May import: analysis, judgement, documents, monitoring (to time what takes long), sqlalchemy,
alembic (in `migrating` alone), argon2 (in `passwords` alone). Must never know: HTTP, pages, settings, the
environment.

Functions take the running transaction, who acts, what is asked and the time; they flush and never commit.
Each change writes exactly one event. Nothing that is kept is ever updated or deleted: state is what the
facts add up to.
"""
