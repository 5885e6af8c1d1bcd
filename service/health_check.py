"""Ask the API of this container whether it answers: `python -m service.health_check`, exit status 0 if it does.

Whether Redis is there is no part of it: a container is not the healthier for being replaced while Redis is away.
"""

import os
import sys
from collections.abc import Mapping
from http.client import HTTPConnection, HTTPException

SECONDS = 3.0
ADDRESS = "127.0.0.1"
"""Where an API that listens on all addresses, as in a container, is reached from inside."""


def main(environment: Mapping[str, str] = os.environ) -> int:
    """Return 0 if the process answers, else 1 with a line on standard error saying what came instead."""
    # Nothing of the service is imported: this runs every few seconds beside it.
    connection = HTTPConnection(ADDRESS, int(environment.get("HOURWRIGHT_PORT", "8080")), timeout=SECONDS)
    try:
        connection.request("GET", "/health/live")
        status = connection.getresponse().status
    except (OSError, HTTPException) as fault:
        print(f"no answer: {fault}", file=sys.stderr)
        return 1
    finally:
        connection.close()
    if status != 200:
        print(f"answered with {status}", file=sys.stderr)
    return 0 if status == 200 else 1


if __name__ == "__main__":
    sys.exit(main())
