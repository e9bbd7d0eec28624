"""The demonstration's store: made, marked, peopled and filled with its year."""

from __future__ import annotations

from collections.abc import Callable
from contextlib import closing
from dataclasses import dataclass
from datetime import datetime, timedelta

from sqlalchemy import inspect

from service.app import create_app
from service.context import services
from service.demonstration.plant import Change, Plant, invented_plant
from service.demonstration.year import Calendar, Year
from service.records import accounts, migrating, tokens
from service.records.database import Database
from service.records.errors import StoreNotUsable
from service.records.roles import CONSOLE
from service.settings import Settings

PEOPLE_BEFORE_THE_FIRST_CHANGE = timedelta(days=1)


@dataclass(frozen=True, kw_only=True, slots=True)
class Demonstration:
    """What was made, and by whom it can be looked at."""

    plant: Plant
    tokens: dict[str, str]
    """For programs, by account name."""


def fill(settings: Settings, now: datetime, on_change: Callable[[Change], None]) -> Demonstration:
    """Make the demonstration in the empty store of `settings`; its year ends in the week before `now`.

    `on_change` is called after each change. Raises StoreNotUsable where the store is not empty.
    """
    plant = invented_plant().ending_before(now)
    calendar = Calendar(plant.year[0].time - PEOPLE_BEFORE_THE_FIRST_CHANGE)
    issued = _people(settings.database_url, plant, calendar.now)
    app = create_app(settings, clock=calendar)
    with app.app_context(), closing(services().database):
        for change in Year(app, calendar, plant, issued).live():
            on_change(change)
    return Demonstration(plant=plant, tokens=issued)


def _people(database_url: str, plant: Plant, now: datetime) -> dict[str, str]:
    """Make and mark the store, add its people and return a token for each."""
    _check_empty(database_url)
    migrating.migrate(database_url, now=now, demonstration=True)
    with closing(Database.open(database_url)) as database, database.writing() as session:
        for person in plant.people:
            new = accounts.NewAccount(
                name=person.name,
                full_name=person.full_name,
                roles=person.roles,
                areas=person.areas,
                password=person.password,
            )
            accounts.add(session, CONSOLE, new, now)
        note = "Made with the demonstration"
        names = [person.name for person in plant.people]
        return {name: tokens.issue(session, CONSOLE, name, note, now)[1] for name in names}


def _check_empty(database_url: str) -> None:
    # before migrating: somebody's records must not even be brought to another schema from here
    with migrating.open_for_migration(database_url) as connection:
        if inspect(connection).get_table_names():
            raise StoreNotUsable("the store is not empty")
