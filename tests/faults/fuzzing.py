"""Requests of every kind against a served process, one by one; none may break it or take more than it should.

    python -m tests.faults.fuzzing --requests 20000
    python -m tests.faults.fuzzing --requests 20000 --database postgresql

Three sources take turns: requests that schemathesis makes up from the served OpenAPI document, right and
wrong by it; attacks on what is read and on who may do what; loops made up over the whole of float64, some of
them recorded, looked at and printed. Every answer is held against the document. The service's processor time
and peak memory are read from /proc request by request, so that this runs on Linux alone. What a request
breaks is collected and told with it.

What a library takes when it is first used is not a request's: one of each kind goes before. The hash of a
password takes the memory that Argon2id is told to take, on purpose; so much is allowed there beside the rest.
"""

from __future__ import annotations

import argparse
import json
import random
import re
import subprocess
import tempfile
from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO
from urllib.parse import urlencode

import requests
from argon2 import PasswordHasher
from schemathesis import Case

from service.pages.visits import COOKIE, VISIT_COOKIE
from service.records import accounts, migrating
from service.records.accounts import NewAccount
from service.records.database import Database, system_clock
from service.records.roles import CONSOLE
from service.verification.verifier import verify
from tests.api import plant
from tests.api.conftest import CHEAP, PEOPLE, add_account, password_of
from tests.api.plant import Body, changed
from tests.clusters import Cluster
from tests.databases import PostgresqlDatabases, SqliteFiles
from tests.faults import described
from tests.faults.attack import ANSWERED, FORM, Attack, World, forms_on, page, sent
from tests.faults.attacks_on_access import attacks_on_access
from tests.faults.attacks_on_reading import attacks_on_reading
from tests.faults.conformance import Answer, Description
from tests.faults.exchanging import NO_ANSWER, exchange, exchange_raw
from tests.faults.hostile_loops import HostileLoops
from tests.faults.killing import Service
from tests.faults.watched_process import Watched

CPU_S_MAX = 2.0
MEMORY_MIB_MAX = 64.0
PASSWORD_HASH_MIB = PasswordHasher().memory_cost / 1024

HASHING = re.compile(r"/sign|/confirm|/password|/decisions|^/v1/accounts$|-resets$|password-changes$")
"""Addresses at which a password may be hashed."""

RECORDED_SHARE = 0.1
"""Share of the hostile loops that become a record."""

VICTIM = NewAccount(
    name="victim", full_name="Victim", roles=("auditor",), areas=(), password=password_of("victim")
)
"""Whose account the made-up requests name, and may close: nobody acts by it."""

DONE = frozenset({200, 201})
TOLD_CHARACTERS_MAX = 4000
TOLD_EACH = 500
"""The figures are told each time so many more requests were sent."""


@dataclass
class Figures:
    """What a run has counted."""

    requests: int = 0
    statuses: Counter[int] = field(default_factory=Counter)
    cpu_s: float = 0.0
    memory_mib: float = 0.0
    memory_with_hash_mib: float = 0.0
    broken: list[str] = field(default_factory=list)
    """What was broken, each with its request."""

    def __str__(self) -> str:
        families = Counter[str]()
        for status, count in self.statuses.items():
            family = {0: "no answer", 501: "501"}.get(status, f"{status // 100}xx")
            families[family] += count
        told = ", ".join(f"{family} {count}" for family, count in sorted(families.items()))
        return (
            f"requests {self.requests} ({told}), most CPU {self.cpu_s:.2f} s, most memory "
            f"{self.memory_mib:.0f} MiB, with a password's hash {self.memory_with_hash_mib:.0f} MiB, "
            f"broken {len(self.broken)}"
        )


@dataclass
class Run:
    """One served store under fire."""

    url: str
    seed: int
    log: int | IO[str] = subprocess.DEVNULL
    figures: Figures = field(default_factory=Figures)

    def __post_init__(self) -> None:
        self.chance = random.Random(self.seed)  # noqa: S311  no secret is made of it
        migrating.migrate(self.url, now=system_clock())
        database = Database.open(self.url, password_hasher=CHEAP)
        with database.writing() as session:
            self.tokens = {person: add_account(session, database, person) for person in PEOPLE}
            accounts.add(session, CONSOLE, VICTIM, database.now())
        database.close()
        self.service = Service(self.url, log=self.log)

    def go(self, wanted: int, tell: Callable[[str], None] = lambda _text: None) -> Figures:
        """Send so many requests; return what was counted."""
        self.service.start()
        try:
            self._begin()
            sources = [self._described(), self._attacks(), self._loops()]
            told, told_of_broken = 0, 0
            while self.figures.requests < wanted:
                for source in sources:
                    next(source)
                for broken in self.figures.broken[told_of_broken:]:
                    tell(broken)
                told_of_broken = len(self.figures.broken)
                if self.figures.requests - told >= TOLD_EACH:
                    told = self.figures.requests
                    tell(str(self.figures))
        finally:
            self.service.kill()
        report = verify(self.url)
        assert report.holds, report.fault
        return self.figures

    def _begin(self) -> None:
        """Make what is attacked, and let every library be loaded."""
        assert self.service.process is not None
        self.watched = Watched(self.service.process.pid)
        document = exchange(self.service.port, "GET", "/v1/openapi.json", None, {})
        self.description = Description(json.loads(document.body))
        loop = self._made("/v1/loops", plant.LOOP)["id"]
        self._made(f"/v1/loops/{loop}/models", plant.MODEL)
        submission = self._made("/v1/submissions", plant.SUBMISSION)
        self.world = World(
            tokens=self.tokens,
            passwords={person: password_of(person) for person in PEOPLE},
            loop=loop,
            submission=submission["id"],
            digest=submission["content_digest"],
            session_cookie=self._signed_in("reviewer"),
        )
        for path in (f"/submissions/{self.world.submission}", "/password"):
            shown = self._answer(page("once before", self.world, path))
            self.world.forms.update(forms_on(shown.body.decode()))
        assert len(self.world.forms) > 1, "the forms are not found"
        measured = [[1.0 / (1.0 + w * w), -w / (1.0 + w * w)] for w in (0.1, 0.3, 1.0, 3.0, 10.0, 30.0)]
        points = {"kind": "frequency_response", "response": measured, "unstable_poles": 0}
        points["frequencies_rad_s"] = [0.1, 0.3, 1.0, 3.0, 10.0, 30.0]
        everything = plant.RECOMPUTATION | {"include": ["curves", "second_opinion"]}
        scanned = changed(everything, "/controller/scan", {"interval_s": 1.7})
        for body in (everything, everything | {"plant_model": points}, scanned):
            self._made("/v1/recomputations", body)
        for path in (
            f"/submissions/{self.world.submission}",
            f"/submissions/{self.world.submission}/sheet.pdf",
        ):
            self._answer(page("once before", self.world, path))

    def _made(self, path: str, body: Body) -> Body:
        answer = self._answer(sent("once before", path, body))
        assert answer.status in DONE, answer.body
        made: Body = json.loads(answer.body)
        return made

    def _signed_in(self, person: str) -> str:
        """The cookie of somebody who has signed in by the form."""
        asked = exchange(self.service.port, "GET", "/sign-in", None, {})
        visit = re.search(rf"{VISIT_COOKIE}=([^;]+)", asked.headers["set-cookie"])
        token = re.search(rb'name="token"[^>]*value="(\w+)"', asked.body)
        assert visit, asked.headers
        assert token, asked.body
        typed = {"name": person, "password": password_of(person), "token": token[1].decode()}
        headers = FORM | {"Cookie": f"{VISIT_COOKIE}={visit[1]}"}
        answer = exchange(self.service.port, "POST", "/sign-in", urlencode(typed).encode(), headers)
        session = re.search(rf"{COOKIE}=([^;]+)", answer.headers["set-cookie"])
        assert session, answer
        return session[1]

    def _attacks(self) -> Iterator[None]:
        while True:
            attacks = [
                *attacks_on_reading(self.world, self.chance),
                *attacks_on_access(self.world, self.chance),
            ]
            self.chance.shuffle(attacks)
            for attack in attacks:
                self.attack(attack)
                yield

    def _loops(self) -> Iterator[None]:
        drawn = HostileLoops(self.seed)
        while True:
            if self.chance.random() < RECORDED_SHARE:
                yield from self._recorded(drawn.request(in_full=True))
            else:
                self.attack(sent("a loop", "/v1/recomputations", drawn.request(), statuses=ANSWERED))
                yield

    def _recorded(self, loop: Body) -> Iterator[None]:
        """A hostile loop as a record, and all that is shown of it."""
        tag = f"H-{self.figures.requests}"
        made = self.attack(sent("a loop to record", "/v1/loops", plant.LOOP | {"tag": tag}, statuses=DONE))
        yield
        model = plant.MODEL | {"plant_model": loop["plant_model"]}
        path = f"/v1/loops/{json.loads(made.body)['id']}/models"
        self.attack(sent("a model to record", path, model, statuses=ANSWERED))
        yield
        gains = {"loop": {"site": plant.LOOP["site"], "tag": tag}, "controller": loop["controller"]}
        body = plant.SUBMISSION | gains
        submitted = self.attack(sent("gains to record", "/v1/submissions", body, statuses=ANSWERED))
        yield
        if submitted.status != 201:
            return
        number = json.loads(submitted.body)["id"]
        for part in ("", "/content", "/curves", "/comparison", "/sheet.pdf"):
            self.attack(
                Attack("what is recorded", f"/v1/submissions/{number}{part}", "GET", statuses=ANSWERED)
            )
            yield
        self.attack(page("the page of what is recorded", self.world, f"/submissions/{number}"))
        yield

    def _described(self) -> Iterator[None]:
        session = requests.Session()
        session.trust_env = False
        known = {"loop_id": self.world.loop, "submission_id": self.world.submission, "name": VICTIM.name}
        cases = described.cases(self.description.document, self.tokens, known, self.seed)
        for case in cases:
            self._case(case, session)
            yield

    def _case(self, case: Case, session: requests.Session) -> None:
        told = case.as_curl_command()[:TOLD_CHARACTERS_MAX]
        path = case.formatted_path
        with self._measured(told, path):
            response = case.call(
                base_url=f"http://127.0.0.1:{self.service.port}", session=session, timeout=60
            )
        headers = {name.lower(): values[0] for name, values in response.headers.items()}
        answer = Answer(response.status_code, headers, response.content)
        self.figures.statuses[answer.status] += 1
        for departure in self.description.departures(case.method, path, answer):
            self._breaks(departure, told)
        for failure in described.failures(case, response):
            self._breaks(failure, told)

    def attack(self, attack: Attack) -> Answer:
        """Send one attack, and hold what it gets against what it may get."""
        body = (attack.raw or attack.body or b"")[:TOLD_CHARACTERS_MAX]
        told = f"{attack.name}: {attack.method} {attack.path[:200]} {body!r}"
        with self._measured(told, attack.path):
            answer = self._answer(attack)
        self.figures.statuses[answer.status] += 1
        closed = attack.raw is not None and answer == NO_ANSWER
        if answer.status not in attack.statuses and not closed:
            self._breaks(f"the answer is {answer.status} {answer.body[:300]!r}", told)
        if attack.absent is not None and attack.absent in answer.body + str(answer.headers).encode():
            self._breaks(f"the answer holds {attack.absent!r}", told)
        if attack.raw is None:
            path = attack.path.partition("?")[0]
            for departure in self.description.departures(attack.method, path, answer):
                self._breaks(departure, told)
        return answer

    def _answer(self, attack: Attack) -> Answer:
        if attack.raw is not None:
            return exchange_raw(self.service.port, attack.raw)
        headers = dict(attack.headers)
        if attack.person is not None:
            headers.setdefault("Authorization", f"Bearer {self.tokens[attack.person]}")
        return exchange(self.service.port, attack.method, attack.path, attack.body, headers)

    @contextmanager
    def _measured(self, told: str, path: str) -> Iterator[None]:
        """Count a request, and what the service takes for it."""
        self.watched.forget_peak()
        before_s, before_mib = self.watched.cpu_s, self.watched.resident_mib
        yield
        cpu_s, mib = self.watched.cpu_s - before_s, self.watched.peak_mib - before_mib
        figures, allowed = self.figures, MEMORY_MIB_MAX
        figures.requests += 1
        figures.cpu_s = max(figures.cpu_s, cpu_s)
        if HASHING.search(path):
            allowed += PASSWORD_HASH_MIB
            figures.memory_with_hash_mib = max(figures.memory_with_hash_mib, mib)
        else:
            figures.memory_mib = max(figures.memory_mib, mib)
        if cpu_s > CPU_S_MAX:
            self._breaks(f"it took {cpu_s:.2f} s of CPU", told)
        if mib > allowed:
            self._breaks(f"it took {mib:.0f} MiB", told)

    def _breaks(self, what: str, told: str) -> None:
        self.figures.broken.append(f"{what} -- {told}")


def main() -> None:
    """Run, print what is broken as it is found, and the figures."""
    parser = argparse.ArgumentParser(description="Send hostile requests to a served process.")
    parser.add_argument("--database", choices=("sqlite", "postgresql"), default="sqlite")
    parser.add_argument("--requests", type=int, default=20_000)
    parser.add_argument("--seed", type=int, default=random.SystemRandom().randrange(10**6))
    parser.add_argument(
        "--log", type=argparse.FileType("w"), default=subprocess.DEVNULL, help="of the service"
    )
    asked = parser.parse_args()
    print(f"seed {asked.seed}")
    if asked.database == "sqlite":
        with tempfile.TemporaryDirectory() as folder:
            _tell(Run(SqliteFiles(Path(folder)).new(), asked.seed, asked.log), asked.requests)
        return
    cluster = Cluster()
    try:
        _tell(Run(PostgresqlDatabases(cluster).new(), asked.seed, asked.log), asked.requests)
    finally:
        cluster.remove()


def _tell(run: Run, wanted: int) -> None:
    figures = run.go(wanted, lambda text: print(text, flush=True))
    print(figures)
    if figures.broken:
        raise SystemExit(1)


if __name__ == "__main__":
    main()
