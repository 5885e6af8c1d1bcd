"""Run the API: what `hourwright serve` starts."""

import sys

from pydantic import ValidationError

from service.connection import WrongPrefix, connect, require_prefix
from service.settings import PREFIX, Settings, settings
from service.store.documents import RedisDocumentStore
from service.store.jobs import RedisJobStore
from service.web.application import Application, create_app
from service.web.logs import log_as_json_lines
from service.web.server import run
from service.web.settings import WebSettings

NO_KEYS_YET = (
    "this version has no API keys yet: whoever reaches the port can use the service. Where only those reach it who "
    f"may, say so with {PREFIX}NO_AUTH=true; without that it does not start"
)


def serve() -> int:
    """Serve until told to stop; Redis may come later, and go and come back.

    Returns 2, with a line on standard error, where it is told what cannot be, and 1 where it cannot listen.
    """
    log_as_json_lines()
    try:
        chosen = settings()
        require_prefix(chosen.key_prefix)
        web = web_settings(chosen)
        app = application(chosen, web)
    except ValidationError as wrong:
        return _refused("; ".join(_words(error["loc"], error["msg"]) for error in wrong.errors()), 2)
    except (ValueError, WrongPrefix, OSError) as wrong:
        return _refused(str(wrong), 2)
    if not chosen.no_auth:
        return _refused(NO_KEYS_YET, 2)
    try:
        return run(app, web)
    except OSError as fault:
        return _refused(f"cannot listen at {web.host}, port {web.port}: {fault.strerror or fault}", 1)


def web_settings(chosen: Settings) -> WebSettings:
    """Take from the settings of the process those of its HTTP side."""
    return WebSettings(
        host=chosen.host,
        port=chosen.port,
        allowed_hosts=chosen.allowed_hosts,
        trusted_proxy=chosen.trusted_proxy,
        threads=chosen.http_threads,
        drain_seconds=chosen.drain_seconds,
    )


def application(chosen: Settings, web: WebSettings) -> Application:
    """Make the application on the stores in Redis; raises ValueError for an address that is none.

    Raises OSError where the file of Redis's password cannot be read.
    """
    redis = connect(chosen.redis_url, chosen.redis_password)
    return create_app(web, RedisJobStore(redis, chosen), RedisDocumentStore(redis, chosen))


def _words(place: tuple[int | str, ...], message: str) -> str:
    return f"{PREFIX}{'.'.join(str(step) for step in place).upper()}: {message}"


def _refused(words: str, status: int) -> int:
    print(f"hourwright serve: {words}", file=sys.stderr)
    return status


if __name__ == "__main__":
    sys.exit(serve())
