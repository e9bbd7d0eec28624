"""Who acts, in which roles and areas, and the two checks that every function starts with."""

from __future__ import annotations

from dataclasses import dataclass

from service.documents.people import Role as Role
from service.records.errors import NotAllowed, NotFound

ROLES: tuple[Role, ...] = ("submitter", "reviewer", "auditor", "administrator")

CONSOLE_NAME = "console"
"""The actor of a command typed on the machine that runs the service; no account can have this name."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Actor:
    """Whoever asks, as read at this very request: a role taken away is gone at the next one."""

    account_id: str | None
    name: str
    full_name: str
    roles: frozenset[Role]
    areas: frozenset[str] = frozenset()
    """Areas that this account sees; none stands for every area."""

    @property
    def sees_every_area(self) -> bool:
        """True where the account is not limited to areas."""
        return not self.areas

    def sees(self, area: str) -> bool:
        """True where `area` lies within what this account sees."""
        return self.sees_every_area or area in self.areas


CONSOLE = Actor(
    account_id=None, name=CONSOLE_NAME, full_name="Command on the server", roles=frozenset({"administrator"})
)


def require_role(actor: Actor, *roles: Role) -> None:
    """Raise NotAllowed unless the actor has one of `roles`."""
    if actor.roles.isdisjoint(roles):
        raise NotAllowed(f"this needs the role {' or '.join(roles)}")


def require_area(actor: Actor, area: str, what: str) -> None:
    """Raise NotFound, naming `what`, where `area` lies outside what the actor sees."""
    if not actor.sees(area):
        raise NotFound(f"there is no such {what}")
