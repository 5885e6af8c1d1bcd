"""Weaken a resolved compose model in one place at a time: the policy must notice each.

As a program: the model on standard input, a line for each weakening that goes unnoticed, exit status 1 if there is one.
"""

import json
import sys
from collections.abc import Callable
from copy import deepcopy
from typing import Any

from tests.containers.policy import Model, faults

Weakening = tuple[str, str, Callable[[Model], Any]]
"""The service it befalls, the fault that it must be found by, and what it does to that service."""


def _set(**members: Any) -> Callable[[Model], Any]:
    return lambda service: service.update(members)


def _in_command(old: str, new: str) -> Callable[[Model], Any]:
    def weaken(service: Model) -> None:
        service["command"] = [part.replace(old, new) for part in service["command"]]

    return weaken


WEAKENINGS: tuple[Weakening, ...] = (
    ("api", "root is read-only", lambda service: service.pop("read_only")),
    ("worker", "no capability is kept", lambda service: service.pop("cap_drop")),
    ("worker", "no capability is kept", _set(cap_add=["SYS_PTRACE"])),
    ("keeper", "no new privileges", lambda service: service.pop("security_opt")),
    ("api", "seccomp and the like stay on", lambda service: service["security_opt"].append("seccomp:unconfined")),
    ("redis", "is not privileged", _set(privileged=True)),
    ("worker", "has no devices", _set(devices=[{"source": "/dev/mem"}])),
    ("api", "no namespace of the host", _set(network_mode="host")),
    ("worker", "no namespace of the host", _set(pid="host")),
    ("redis", "user is no root", _set(user="0:0")),
    ("api", "/tmp is sized and runs nothing", _set(tmpfs=["/tmp"])),
    ("api", "/tmp is sized and runs nothing", _set(tmpfs=["/tmp:size=64m,nosuid,nodev"])),
    ("keeper", "no engine socket", _set(volumes=[{"type": "bind", "source": "/run/docker.sock", "target": "/s"}])),
    ("worker", "no folder of the host", _set(volumes=[{"type": "bind", "source": "/etc", "target": "/e"}])),
    ("worker", "memory is limited", lambda service: service.pop("mem_limit")),
    ("urgent-worker", "processes are limited", lambda service: service.pop("pids_limit")),
    ("worker", "processors are limited", lambda service: service.pop("cpus")),
    ("worker", "has longer to stop than it takes", _set(stop_grace_period="15s")),
    ("api", "has longer to stop than it takes", lambda service: service.pop("stop_grace_period")),
    ("redis", "image has a version", _set(image="redis")),
    ("redis", "image has a version", _set(image="redis:latest")),
    ("api", "image comes from no named registry", _set(image="registry.example/hourwright:1")),
    ("worker", "zombies are reaped", lambda service: service.pop("init")),
    ("keeper", "is started again", _set(restart="no")),
    ("api", "logs are rotated", lambda service: service.pop("logging")),
    ("worker", "health is not switched off", _set(healthcheck={"disable": True})),
    ("worker", "waits for health", lambda service: service["depends_on"]["redis"].update(condition="service_started")),
    ("api", "ports are on loopback", lambda service: service["ports"][0].update(host_ip="0.0.0.0")),
    ("api", "ports are on loopback", lambda service: service["ports"][0].pop("host_ip")),
    ("api", "no secret in the environment", lambda service: service["environment"].update(REDIS_PASSWORD="x")),
    ("redis", "publishes no port", _set(ports=[{"target": 6379, "host_ip": "127.0.0.1"}])),
    ("redis", "is on internal networks only", lambda service: service["networks"].update(outside=None)),
    ("redis", "has a password, or does not start", _in_command('test -n "$$password"', "true")),
    ("redis", "no password on its command line", _in_command("/tmp/redis.conf", '--requirepass "$$password"')),
    ("redis", "keeps an append-only file", _in_command("appendonly yes", "appendonly no")),
    ("redis", "refuses when full, and drops nothing", _in_command("noeviction", "allkeys-lru")),
    ("redis", "keeps its data in a volume", lambda service: service.pop("volumes")),
)


def unnoticed(model: Model) -> list[str]:
    """List the weakenings of a sound model that the policy does not name."""
    missed = []
    for name, fault, weaken in WEAKENINGS:
        weak = deepcopy(model)
        weaken(weak["services"][name])
        if f"{name}: {fault}" not in faults(weak):
            missed.append(f"{name}: {fault}")
    return missed


if __name__ == "__main__":
    missed = unnoticed(json.load(sys.stdin))
    print("\n".join(missed) or f"policy: all {len(WEAKENINGS)} weakenings are noticed")
    sys.exit(bool(missed))
