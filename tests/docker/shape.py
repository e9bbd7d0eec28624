"""The command of the image, run as the container would run it, where there is no Docker engine.

    python -m tests.docker.shape [PYTHON]

As root on Linux: a mount namespace in which every file system is read-only but for one in memory (the
container's /tmp), the user 10001 with no capability that writes, and no way to gain one. PYTHON is the
interpreter of an environment with the service in it; the present one, unless another is named. In it the
service starts on a PostgreSQL server, computes a submission with its second opinion, prints a sheet, and ends
at SIGTERM; the memory file system shows what it wrote.
"""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
import tempfile
import urllib.request
from pathlib import Path

from service.records import migrating
from service.records.database import Database, system_clock
from tests.api import plant
from tests.api.conftest import CHEAP, SECRET_KEY, add_account
from tests.clusters import Cluster

IN_THE_NAMESPACE = """
set -eu
mount -t tmpfs -o mode=1777 tmpfs "$WRITABLE"
while read -r _ place kind _; do
    case $kind:$place in
        tmpfs:"$WRITABLE" | proc:* | sysfs:* | dev*:* | cgroup*:*) ;;
        *) mount -o remount,bind,ro "$place" 2>/dev/null || echo "still writable: $place" >&2 ;;
    esac
done < /proc/self/mounts
cd "$WRITABLE"
# reading what is root's alone is a matter of this machine, not of the image: there, all of it is for everyone
exec setpriv --reuid=10001 --regid=10001 --clear-groups --no-new-privs --bounding-set=-all,+dac_read_search \\
    --inh-caps=-all,+dac_read_search --ambient-caps=-all,+dac_read_search "$@"
"""


def main() -> None:
    """Run it and print what was seen."""
    python = sys.argv[1] if sys.argv[1:] else sys.executable
    cluster = Cluster()
    try:
        with tempfile.TemporaryDirectory() as folder:
            _run(python, cluster, Path(folder))
    finally:
        cluster.remove()


def _run(python: str, cluster: Cluster, folder: Path) -> None:
    url = cluster.url(cluster.create())
    migrating.migrate(url, now=system_clock())
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        token = add_account(session, database, "submitter")
    database.close()
    environment = {
        "GAIN_SIGNOFF_DATABASE_URL": url,
        "GAIN_SIGNOFF_SECRET_KEY": SECRET_KEY,
        "PATH": os.environ["PATH"],
        "PYTHONDONTWRITEBYTECODE": "1",
        "PYTHONUNBUFFERED": "1",
        "PYTHONPATH": os.environ.get("PYTHONPATH", "") if python != sys.executable else os.getcwd(),
        "MPLCONFIGDIR": str(folder / "matplotlib"),
        "TMPDIR": str(folder),
        "WRITABLE": str(folder),
    }
    inside = ["unshare", "--mount", "--propagation", "private", "sh", "-c", IN_THE_NAMESPACE, "sh"]
    write = f"open({str(Path.cwd() / 'written')!r}, 'w')"
    refused = subprocess.run(
        [*inside, python, "-c", write], env=environment, capture_output=True, text=True, check=False
    )
    assert "Read-only file system" in refused.stderr or "Permission denied" in refused.stderr, refused.stderr
    print("outside its own place nothing can be written:", refused.stderr.strip().splitlines()[-1])
    serve = [python, "-m", "service.command", "serve", "--port", "0"]
    process = subprocess.Popen([*inside, *serve], env=environment, stdout=subprocess.PIPE, text=True)
    try:
        assert process.stdout is not None
        address = process.stdout.readline().removeprefix("Serving at ").strip()
        assert address, "the service did not start"
        _work(address, token)
        status = Path(f"/proc/{process.pid}/status").read_text()
        print("user, capabilities:", re.findall(r"(?:Uid|CapEff|CapBnd|NoNewPrivs):\s*(\S+)", status))
        written = subprocess.run(
            # whichever stands on PATH
            ["nsenter", f"--target={process.pid}", "--mount", "find", str(folder), "-type", "f"],  # noqa: S607
            capture_output=True,
            text=True,
            check=True,
        )
        print("written:", written.stdout.split() or "nothing")
        process.send_signal(signal.SIGTERM)
        print("ended with", process.wait(timeout=40))
    finally:
        process.kill()
        process.communicate()


def _work(address: str, token: str) -> None:
    def call(path: str, body: object = None) -> bytes:
        headers = {"Authorization": f"Bearer {token}"}
        headers |= {"Content-Type": "application/json"} if body is not None else {}
        sent = None if body is None else json.dumps(body).encode()
        request = urllib.request.Request(address + path, sent, headers)  # noqa: S310  the service of this run
        with urllib.request.urlopen(request, timeout=120) as answer:  # noqa: S310  the service of this run
            return bytes(answer.read())

    loop = json.loads(call("/v1/loops", plant.LOOP))["id"]
    call(f"/v1/loops/{loop}/models", plant.MODEL)
    made = json.loads(call("/v1/submissions", plant.SUBMISSION))
    sheet = call(f"/v1/submissions/{made['id']}/sheet.pdf")
    print(f"submitted: {made['verdict']}; sheet: {len(sheet)} bytes")
    urllib.request.urlopen(f"{address}/readyz", timeout=20).close()  # noqa: S310  the service of this run


if __name__ == "__main__":
    main()
