"""What an account sees and may do by its roles and areas alone."""

from __future__ import annotations

import pytest

from service.records.errors import NotAllowed, NotFound
from service.records.roles import CONSOLE, ROLES, Actor, Role, require_area, require_role


def _actor(*roles: Role, areas: tuple[str, ...] = ()) -> Actor:
    return Actor(account_id="a", name="a", full_name="A", roles=frozenset(roles), areas=frozenset(areas))


def test_an_account_without_areas_sees_all_and_one_with_areas_those_alone() -> None:
    everywhere, here = _actor(), _actor(areas=("Drying", "Washing"))
    assert (everywhere.sees_every_area, here.sees_every_area) == (True, False)
    for area, seen in (("Drying", True), ("Washing", True), ("drying", False), ("", False)):
        assert everywhere.sees(area)
        assert here.sees(area) is seen
    require_area(here, "Drying", "loop")
    with pytest.raises(NotFound, match="there is no such loop"):
        require_area(here, "Tank farm", "loop")


@pytest.mark.parametrize("role", ROLES)
def test_one_of_the_roles_that_are_asked_for_is_enough(role: Role) -> None:
    require_role(_actor(role), role)
    require_role(_actor(role), *ROLES)
    with pytest.raises(NotAllowed, match="this needs the role"):
        require_role(_actor(*(other for other in ROLES if other != role)), role)


def test_a_command_on_the_server_administers_and_signs_nothing() -> None:
    assert (CONSOLE.name, CONSOLE.account_id, CONSOLE.roles) == ("console", None, {"administrator"})
