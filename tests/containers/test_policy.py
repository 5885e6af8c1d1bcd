"""The policy finds nothing in a sound model, and each weakening of it by name."""

from typing import Any

import pytest

from tests.containers.mutations import WEAKENINGS, unnoticed
from tests.containers.policy import LONGEST_SHUTDOWN_SECONDS, Model, faults, seconds

REDIS_COMMAND = """
password="$$(cat /run/secrets/redis_password)"; test -n "$$password"
printf "requirepass $$password" 'appendonly yes' 'maxmemory 1mb' 'maxmemory-policy noeviction' > /tmp/redis.conf
exec redis-server /tmp/redis.conf
"""


@pytest.fixture
def sound() -> Model:
    """Give a small model of the same services, in the form in which Compose resolves it."""
    services: dict[str, dict[str, Any]] = {
        name: {
            "image": "image:1",
            "read_only": True,
            "cap_drop": ["ALL"],
            "security_opt": ["no-new-privileges:true"],
            "tmpfs": ["/tmp:size=1m,noexec,nosuid,nodev"],
            "mem_limit": "1073741824",
            "pids_limit": 64,
            "cpus": 1,
            "stop_grace_period": "1m0s",
            "init": True,
            "restart": "unless-stopped",
            "logging": {"options": {"max-size": "1m", "max-file": "2"}},
            "healthcheck": {"test": ["CMD", "true"]},
            "environment": {"HOURWRIGHT_REDIS_PASSWORD_FILE": "/run/secrets/redis_password"},
            "depends_on": {"redis": {"condition": "service_healthy"}},
            "networks": {"inside": None},
        }
        for name in LONGEST_SHUTDOWN_SECONDS
    }
    services["api"]["ports"] = [{"host_ip": "127.0.0.1", "target": 8080}]
    services["redis"] |= {
        "user": "999:999",
        "command": ["sh", "-euc", REDIS_COMMAND],
        "volumes": [{"type": "volume", "target": "/data"}],
        "depends_on": {},
    }
    return {"services": services, "networks": {"inside": {"internal": True}, "outside": {}}}


def test_a_sound_model_has_no_fault(sound: Model) -> None:
    assert faults(sound) == []


def test_every_weakening_is_noticed_by_name(sound: Model) -> None:
    assert len(WEAKENINGS) > 30
    assert unnoticed(sound) == []


def test_a_service_that_is_missing_is_a_fault(sound: Model) -> None:
    del sound["services"]["keeper"]
    assert faults(sound) == ["keeper: missing"]


@pytest.mark.parametrize(("text", "count"), [("40s", 40.0), ("1m30s", 90.0), ("1h0m5s", 3605.0), ("0s", 0.0)])
def test_a_duration_is_read_as_compose_writes_it(text: str, count: float) -> None:
    assert seconds(text) == count
