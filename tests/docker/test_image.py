"""The files that make the image and bring it up, as far as they can be tried without a Docker engine."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
import yaml

from service.command.main import main
from service.command.serving import DRAIN_S

ROOT = Path(__file__).parents[2]
DOCKERFILE = (ROOT / "docker" / "Dockerfile").read_text("utf-8")
COMPOSE: dict[str, Any] = yaml.safe_load((ROOT / "docker" / "compose.yaml").read_text("utf-8"))
CHECK = [sys.executable, "-m", "check_jsonschema", "--builtin-schema", "vendor.compose-spec"]
OURS = ("migrate", "service")
"""The containers of the service's own image."""


def instructions() -> list[list[str]]:
    """Each instruction of the Dockerfile as its words."""
    lines = "\n".join(line for line in DOCKERFILE.splitlines() if not line.startswith("#"))
    return [line.split() for line in lines.replace("\\\n", " ").splitlines() if line.strip()]


def test_everything_that_is_copied_into_the_image_is_there_and_let_through() -> None:
    let_through = (ROOT / "docker" / "Dockerfile.dockerignore").read_text("utf-8").splitlines()
    sources = [
        source
        for name, *words in instructions()
        if name == "COPY" and not words[0].startswith("--from")
        for source in words[:-1]
    ]
    assert len(sources) >= 6
    for source in sources:
        assert (ROOT / source).exists()
        assert f"!{source}" in let_through


def test_the_image_runs_as_nobody_in_particular_and_takes_packages_by_their_digest_only() -> None:
    last = {name: words for name, *words in instructions()}
    assert last["USER"] == ["10001:10001"]
    assert "MPLCONFIGDIR=/tmp/matplotlib" in last["ENV"]
    installs = [
        " ".join(words)
        for name, *words in instructions()
        if name == "RUN" and "pip install" in " ".join(words)
    ]
    for install in " && ".join(installs).split("&&"):
        if "pip install" in install:
            assert "--require-hashes" in install or "--no-index" in install


def test_the_compose_file_is_one_by_its_published_schema() -> None:
    """Source: the Compose Specification's JSON schema, as check-jsonschema brings it along."""
    checked = subprocess.run(
        [*CHECK, str(ROOT / "docker" / "compose.yaml")], capture_output=True, text=True, check=False
    )
    assert checked.returncode == 0, checked.stdout


def test_the_schema_would_see_a_misspelt_word(tmp_path: Path) -> None:
    (tmp_path / "compose.yaml").write_text("services: {service: {image: a, read_onyl: true}}")
    checked = subprocess.run([*CHECK, str(tmp_path / "compose.yaml")], capture_output=True, check=False)
    assert checked.returncode == 1


@pytest.mark.parametrize("name", OURS)
def test_what_runs_our_image_can_write_nowhere_but_in_memory_and_gains_no_right(name: str) -> None:
    container = COMPOSE["services"][name]
    assert container["read_only"] is True
    assert container["tmpfs"] == ["/tmp"]  # noqa: S108  a place in the container
    assert container["cap_drop"] == ["ALL"]
    assert "volumes" not in container
    assert "privileged" not in container


@pytest.mark.parametrize("name", OURS)
def test_the_commands_of_the_containers_are_commands_of_ours(name: str) -> None:
    command, *options = COMPOSE["services"][name]["command"]
    subject = main.get_command(None, command)  # type: ignore[arg-type]  # the group looks at the name alone
    assert subject is not None
    subject.make_context(command, options)


def test_no_secret_is_in_the_file_and_each_container_gets_its_own_only() -> None:
    for container in COMPOSE["services"].values():
        for name, value in container.get("environment", {}).items():
            assert name.endswith("_FILE") or name == "POSTGRES_INITDB_ARGS"
            assert not name.endswith("_FILE") or Path(value).name in container["secrets"]
    of = {name: set(container["secrets"]) for name, container in COMPOSE["services"].items()}
    assert not of["service"] & (of["migrate"] | of["database"])
    assert set().union(*of.values()) == set(COMPOSE["secrets"])


def test_the_service_has_longer_to_end_than_its_requests_have() -> None:
    assert float(COMPOSE["services"]["service"]["stop_grace_period"].rstrip("s")) > DRAIN_S


def test_no_port_is_published_beyond_this_machine() -> None:
    published = [port for each in COMPOSE["services"].values() for port in each.get("ports", ())]
    assert published == ["127.0.0.1:8000:8000"]
    assert COMPOSE["networks"]["records"]["internal"] is True
