"""Hold the resolved model of compose.yaml (`docker compose config --format json`) to what confines its containers.

The list is that of the CIS Docker Benchmark, section 5 (numbers from memory), and of the OWASP Docker Security Cheat
Sheet, rules 1 to 8. As a program: the model on standard input, a line for each fault, exit status 1 if there is one.
"""

import json
import sys
from collections.abc import Iterator
from typing import Any

SECRET_WORDS = ("PASSWORD", "SECRET", "TOKEN", "KEY")
LONGEST_SHUTDOWN_SECONDS = {"api": 30, "worker": 15, "urgent-worker": 15, "keeper": 10, "redis": 10}
"""What each process may take to end by its own settings."""

Model = dict[str, Any]


def faults(model: Model) -> list[str]:
    """List what the model lacks, each as `service: what`."""
    services: Model = model["services"]
    found = [f"{name}: missing" for name in LONGEST_SHUTDOWN_SECONDS if name not in services]
    for name, service in services.items():
        checks = (*_rights(service), *_limits(name, service), *_upkeep(service), *_openings(service))
        found += [f"{name}: {what}" for what, holds in checks if not holds]
    if "redis" in services:
        found += [f"redis: {what}" for what, holds in _store(model, services["redis"]) if not holds]
    return found


def _rights(service: Model) -> Iterator[tuple[str, bool]]:
    yield "root is read-only", service.get("read_only") is True
    yield "no capability is kept", service.get("cap_drop") == ["ALL"] and not service.get("cap_add")
    yield "no new privileges", "no-new-privileges:true" in service.get("security_opt", [])
    yield "seccomp and the like stay on", not any("unconfined" in option for option in service.get("security_opt", []))
    yield "is not privileged", not service.get("privileged")
    yield "has no devices", not service.get("devices")
    yield (
        "no namespace of the host",
        not any(service.get(kind) for kind in ("network_mode", "pid", "ipc", "userns_mode")),
    )
    yield "user is no root", str(service.get("user", "10001")).split(":")[0] not in ("0", "root", "")
    yield "/tmp is sized and runs nothing", _small(service.get("tmpfs", []))
    yield "no engine socket", not any("docker.sock" in mount.get("source", "") for mount in service.get("volumes", []))
    yield "no folder of the host", not any(mount.get("type") == "bind" for mount in service.get("volumes", []))


def _small(mounts: list[str] | str) -> bool:
    options = [set(mount.partition(":")[2].split(",")) for mount in ([mounts] if isinstance(mounts, str) else mounts)]
    wanted = {"noexec", "nosuid", "nodev"}
    return bool(options) and all(wanted <= some and any(part.startswith("size=") for part in some) for some in options)


def _limits(name: str, service: Model) -> Iterator[tuple[str, bool]]:
    yield "memory is limited", int(service.get("mem_limit", 0)) > 0
    yield "processes are limited", int(service.get("pids_limit", 0)) > 0
    yield "processors are limited", float(service.get("cpus", 0)) > 0
    grace = seconds(service.get("stop_grace_period", "0s"))
    yield "has longer to stop than it takes", grace > LONGEST_SHUTDOWN_SECONDS.get(name, 0)


def _upkeep(service: Model) -> Iterator[tuple[str, bool]]:
    image = service.get("image", "")
    yield "image has a version", ":" in image and not image.endswith(":latest")
    yield "image comes from no named registry", "/" not in image
    yield "zombies are reaped", service.get("init") is True
    yield "is started again", service.get("restart") in ("unless-stopped", "always", "on-failure")
    options = service.get("logging", {}).get("options", {})
    yield "logs are rotated", bool(options.get("max-size") and options.get("max-file"))
    yield "health is not switched off", not service.get("healthcheck", {}).get("disable")
    waits = {wait.get("condition") for wait in service.get("depends_on", {}).values()}
    yield "waits for health", waits <= {"service_healthy", "service_completed_successfully"}


def _openings(service: Model) -> Iterator[tuple[str, bool]]:
    yield "ports are on loopback", all(p.get("host_ip") in ("127.0.0.1", "::1") for p in service.get("ports", []))
    named = [name for name in service.get("environment", {}) if any(word in name.upper() for word in SECRET_WORDS)]
    yield "no secret in the environment", all(name.endswith("_FILE") for name in named)


def _store(model: Model, redis: Model) -> Iterator[tuple[str, bool]]:
    command = "\n".join(redis.get("command") or [])
    yield "publishes no port", not redis.get("ports")
    yield (
        "is on internal networks only",
        bool(redis.get("networks"))
        and all(model["networks"][network].get("internal") for network in redis["networks"]),
    )
    yield "has a password, or does not start", 'test -n "$$password"' in command and "requirepass" in command
    yield "no password on its command line", "--requirepass" not in command and " -a " not in command
    yield "keeps an append-only file", "appendonly yes" in command
    yield "refuses when full, and drops nothing", "maxmemory-policy noeviction" in command and "maxmemory " in command
    yield "keeps its data in a volume", any(mount.get("target") == "/data" for mount in redis.get("volumes", []))


def seconds(duration: str) -> float:
    """Read a duration as the resolved model writes it: `1m30s`."""
    total, digits = 0.0, ""
    for letter in duration:
        if letter in "hms":
            total += float(digits) * {"h": 3600, "m": 60, "s": 1}[letter]
            digits = ""
        else:
            digits += letter
    return total


if __name__ == "__main__":
    found = faults(json.load(sys.stdin))
    print("\n".join(found) or "policy: nothing found")
    sys.exit(bool(found))
