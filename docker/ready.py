"""The health check of the container: exit status 0 while the service in it says that it can do its work."""

from __future__ import annotations

import http.client
import sys

PORT = 8000


def ready(port: int) -> bool:
    """Ask the service at this port of this machine."""
    connection = http.client.HTTPConnection("127.0.0.1", port, timeout=4)
    try:
        connection.request("GET", "/readyz")
        return connection.getresponse().status == http.client.OK
    except (OSError, http.client.HTTPException):
        return False
    finally:
        connection.close()


if __name__ == "__main__":
    sys.exit(0 if ready(int(sys.argv[1]) if sys.argv[1:] else PORT) else 1)
