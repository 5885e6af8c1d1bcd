"""Run the API: what `hourwright serve` starts."""

import logging
import sys

from service.connection import connect, require_prefix
from service.settings import settings
from service.store.documents import RedisDocumentStore
from service.store.jobs import RedisJobStore
from service.web.application import create_app
from service.web.server import run
from service.web.settings import WebSettings

LOG_FORMAT = "%(asctime)s %(levelname)s %(name)s: %(message)s"


def serve() -> int:
    """Serve until told to stop; Redis may come later, and go and come back."""
    logging.basicConfig(stream=sys.stderr, level=logging.INFO, format=LOG_FORMAT)
    chosen = settings()
    require_prefix(chosen.key_prefix)
    redis = connect(chosen.redis_url, chosen.redis_password)
    web = WebSettings(
        host=chosen.host,
        port=chosen.port,
        allowed_hosts=chosen.allowed_hosts,
        trusted_proxy=chosen.trusted_proxy,
        threads=chosen.http_threads,
        drain_seconds=chosen.drain_seconds,
    )
    return run(create_app(web, RedisJobStore(redis, chosen), RedisDocumentStore(redis, chosen)), web)


if __name__ == "__main__":
    sys.exit(serve())
