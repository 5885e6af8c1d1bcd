"""The service's connection to Redis: short of patience, since a caller is waiting."""

import rq.serializers
from redis import Redis
from redis.backoff import ExponentialWithJitterBackoff
from redis.exceptions import ConnectionError as NoConnection
from redis.retry import Retry
from rq.defaults import RQ_KEY_PREFIX

from schemas.records import rq_prefix

ANSWER_SECONDS = 2.0
CONNECT_SECONDS = 1.0
RETRIES = 2
"""For connections that are refused or were cut, as after a restart. A Redis that is silent is not asked a second time:

the caller would wait once more for nothing, and what was asked may have been done already.
"""


class WrongPrefix(RuntimeError):  # noqa: N818 - says what it is
    """RQ reads its prefix from the environment when it is imported; it is not the one of this deployment."""


def carry_json_only() -> None:
    """Take pickle out of RQ: whatever it would have pickled or unpickled by default travels as JSON."""
    rq.serializers.PickleSerializer = rq.serializers.JSONSerializer  # type: ignore[assignment]
    rq.serializers.SERIALIZER_ALIASES["pickle"] = rq.serializers.JSONSerializer


# Before any queue exists: RQ looks the name up at each use.
carry_json_only()


def connect(url: str, password: str | None = None) -> "Redis":
    """Open a pool of connections on which a call is given up after seconds; replies are bytes."""
    return Redis.from_url(
        url,
        password=password,
        socket_timeout=ANSWER_SECONDS,
        socket_connect_timeout=CONNECT_SECONDS,
        retry=Retry(ExponentialWithJitterBackoff(cap=0.2, base=0.02), RETRIES, (NoConnection,)),
        decode_responses=False,
        protocol=2,
    )


def require_prefix(key_prefix: str) -> None:
    """Raise WrongPrefix unless RQ keeps its keys where this deployment's processes look for them."""
    if (wanted := rq_prefix(key_prefix)) != RQ_KEY_PREFIX:
        raise WrongPrefix(f"set RQ_KEY_PREFIX={wanted} (it is {RQ_KEY_PREFIX}) for the key prefix {key_prefix}")
