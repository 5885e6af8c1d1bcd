"""Bring the deployment up with the engine that is there, use it, break it, stop it: exit status 0 if all holds.

Run from the project's root by verify.sh, with nothing but Python's own library, in a network namespace of its own. It
needs the image, and the password's file named by REDIS_PASSWORD_FILE.
"""

import json
import os
import re
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from http.client import HTTPConnection, HTTPException
from pathlib import Path
from typing import Any

from tests.containers import documents

SERVICES = ("api", "worker", "urgent-worker", "keeper", "redis")
PORT = 8080
BEYOND = "198.51.100.2"
"""A machine outside, which bring_up.sh sets up."""

CONFINED = r"""
[ "$(id -u)" -ne 0 ]
grep -Eq '^CapEff:\s0+$' /proc/self/status; grep -Eq '^CapBnd:\s0+$' /proc/self/status
grep -Eq '^NoNewPrivs:\s1$' /proc/self/status; grep -Eq '^Seccomp:\s2$' /proc/self/status
for place in / /usr /opt /etc /var /run; do
  if touch $place/x 2>/dev/null; then echo "$place is writable"; exit 1; fi
done
grep -Eq ' /tmp tmpfs [^ ]*noexec' /proc/mounts
"""
UNASKED = """
import socket
with socket.create_connection(("redis", 6379), 5) as asked:
    asked.sendall(b"PING\\r\\n")
    print(asked.recv(100).decode())
"""


class DoesNotHold(AssertionError):  # noqa: N818 - says what it is
    """Something that was to hold does not; the message says what."""


def compose(*arguments: str, check: bool = True) -> str:
    """Run Compose on the project's file, and give what it prints."""
    return run("docker", "compose", "--progress", "quiet", *arguments, check=check)


def run(*command: str, check: bool = True) -> str:
    """Run a command; raises DoesNotHold with what it said if it fails and that is to be checked."""
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    if check and done.returncode:
        raise DoesNotHold(f"{' '.join(command)[:200]}: {done.returncode}\n{done.stdout}{done.stderr}")
    return done.stdout


def require(holds: object, what: str) -> None:
    """Raise DoesNotHold unless something is so."""
    if not holds:
        raise DoesNotHold(what)


def until(holds: Callable[[], Any], what: str, seconds: float) -> Any:
    """Ask again and again until something is so, and give it back."""
    end = time.monotonic() + seconds
    while not (found := holds()):
        require(time.monotonic() < end, f"not within {seconds:g} s: {what}")
        time.sleep(0.2)
    return found


def asked(method: str, path: str, body: bytes | None = None, **headers: str) -> tuple[int, Any]:
    """Ask the API over its published port."""
    connection = HTTPConnection("127.0.0.1", PORT, timeout=60)
    try:
        connection.request(method, path, body, headers | ({"Content-Type": "application/json"} if body else {}))
        answer = connection.getresponse()
        return answer.status, json.loads(answer.read())
    finally:
        connection.close()


def submitted(body: bytes, wait_seconds: int = 0) -> Any:
    """Submit a job and give its record, after waiting for its end if told to."""
    headers = {"Prefer": f"wait={wait_seconds}"} if wait_seconds else {}
    status, job = asked("POST", "/v1/jobs", body, **headers)
    require(status == 202, f"not accepted: {status} {job}")
    return job


def job(job_id: str) -> Any:
    """Read a job's record; None while the API is away."""
    try:
        status, record = asked("GET", f"/v1/jobs/{job_id}")
    except (OSError, HTTPException):
        return None
    return record if status == 200 else None


def ended(job_id: str, seconds: float) -> Any:
    """Wait for a job's end and give its record."""
    return until(
        lambda: found if (found := job(job_id)) and found["state"] in ("finished", "failed", "cancelled") else None,
        f"{job_id} ends",
        seconds,
    )


def inspected(service: str) -> Any:
    """Give what the engine knows of a service's container."""
    return json.loads(run("docker", "inspect", *compose("ps", "--all", "--quiet", service).split()))[0]


def main_process(service: str) -> int:
    """Give the id, on this machine, of the process that a container's init looks after."""
    (child, *_) = children(int(inspected(service)["State"]["Pid"]))
    return child


def children(pid: int) -> list[int]:
    """Give the ids of a process's children."""
    return [int(child) for child in Path(f"/proc/{pid}/task/{pid}/children").read_text(encoding="ascii").split()]


def everything_reports_healthy() -> str:
    """Require all five containers to be healthy, and the API to see a keeper and a worker on each queue."""
    compose("up", "--detach", "--no-build", "--pull", "never", "--wait", "--wait-timeout", "90")
    for service in SERVICES:
        health = inspected(service)["State"]["Health"]["Status"]
        require(health == "healthy", f"{service} is {health}")
    status, ready = asked("GET", "/health/ready")
    require((status, ready["status"]) == (200, "pass"), f"not ready: {status} {ready}")
    require(ready["checks"]["workers_by_queue"] == {"jobs": 1, "urgent": 1}, f"{ready}")
    return f"{ready['checks']}"


def a_job_is_planned_over_http() -> str:
    """Submit a request to each queue: the schedule keeps its commitment, and says that it is advisory."""
    said = []
    for is_urgent in (False, True):
        began = time.monotonic()
        done = submitted(documents.small(urgent=is_urgent), wait_seconds=30)
        require((done["state"], done["outcome"]) == ("finished", "optimal"), f"{done}")
        status, schedule = asked("GET", f"/v1/jobs/{done['id']}/schedule")
        require(status == 200 and "advisory" in json.dumps(schedule).lower(), f"{status} {schedule}")
        powers = next(iter(schedule["assets"]))["power_mw"]
        require(sum(power >= 1.0 - 1e-6 for power in powers) >= 2, f"two firm hours of at least 1 MW: {powers}")
        said.append(f"{'urgent' if is_urgent else 'jobs'}: {powers} MW in {time.monotonic() - began:.2f} s")
    return "; ".join(said)


def containers_are_confined() -> str:
    """Require of each a user that is not root and can do nothing more, and a root that it cannot write to."""
    for service in SERVICES:
        compose("exec", "-T", service, "sh", "-euc", CONFINED)
        host = inspected(service)["HostConfig"]
        require(host["Memory"] > 0 and host["PidsLimit"] > 0 and host["NanoCpus"] > 0, f"{service} has no limits")
    users = [compose("exec", "-T", service, "id", "-u").strip() for service in SERVICES]
    return f"users {dict(zip(SERVICES, users, strict=True))}"


def memory_and_processes_are_limited() -> str:
    """Ask for more than the limits: it ends in its container, and only there."""
    used = run("docker", "stats", "--no-stream", "--format", "{{.Name}} {{.MemUsage}}").split("\n")
    # In a container of its own, with the worker's limits: the engine would not forget that one ran out of memory.
    once = ["docker", "compose", "run", "--rm", "--no-deps", "-T", "worker", "python", "-c"]
    hog = "x = b'x' * (3 * 2**30)"
    done = subprocess.run([*once, hog], capture_output=True, check=False)
    require(done.returncode == 137, f"3 GiB in 2 GiB: ended with {done.returncode}")
    threads = "import threading as t; e = t.Event(); [t.Thread(target=e.wait, daemon=True).start() for _ in range(200)]"
    done = subprocess.run([*once, threads], capture_output=True, check=False)
    require(b"can't start new thread" in done.stderr, f"200 threads under 128: {done.stderr!r}")
    return f"3 GiB and 200 threads refused; in use {', '.join(sorted(filter(None, used)))}"


def the_password_is_nowhere_to_be_read() -> str:
    """Look for it on command lines, in environments, in logs and in the image."""
    password = Path(os.environ["REDIS_PASSWORD_FILE"]).read_text(encoding="ascii").strip()
    for service in SERVICES:
        require(password not in compose("top", service), f"{service}: on a command line")
        require(password not in json.dumps(inspected(service)), f"{service}: in the engine's record")
        require(password not in compose("logs", service), f"{service}: in the log")
    history = run("docker", "history", "--no-trunc", inspected("api")["Image"])
    require(not re.search(r"password|pip\.conf=|https?://", history), f"in the image's history: {history}")
    compose("exec", "-T", "api", "sh", "-euc", "! [ -s /etc/pip.conf ] && ! [ -s /etc/pip-ca.pem ]")
    return "command lines, environments, logs, history"


def redis_is_out_of_reach() -> str:
    """Ask it without the password, and from the machine; and look for a way out of its network."""
    answer = compose("exec", "-T", "api", "python", "-c", UNASKED)
    require(answer.startswith("-NOAUTH"), f"without a password it says {answer}")
    try:
        HTTPConnection("127.0.0.1", 6379, timeout=2).connect()
    except OSError:
        pass
    else:
        raise DoesNotHold("Redis is published")
    require(_reaches_beyond("api"), "the API's outer network leads nowhere, so this would show nothing")
    for service in ("worker", "urgent-worker", "keeper"):
        require(not _reaches_beyond(service), f"{service} has a way out")
    reach = f"timeout 5 bash -c 'exec 3<>/dev/tcp/{BEYOND}/80'"
    done = subprocess.run(
        ["docker", "compose", "exec", "-T", "redis", "sh", "-c", reach], check=False, capture_output=True
    )
    require(done.returncode, "redis has a way out")
    return answer.strip()


def _reaches_beyond(service: str) -> bool:
    program = f"import socket; socket.create_connection(('{BEYOND}', 80), 3).close()"
    done = subprocess.run(
        ["docker", "compose", "exec", "-T", service, "python", "-c", program], check=False, capture_output=True
    )
    return done.returncode == 0


def redis_does_not_start_without_a_password() -> str:
    """Start it with an empty secret: it ends."""
    empty = Path(os.environ["REDIS_PASSWORD_FILE"]).with_name("empty")
    empty.touch(mode=0o444)
    command = ["docker", "compose", "--project-name", "open", "run", "--rm", "--no-deps", "-T", "redis"]
    done = subprocess.run(
        command, env=os.environ | {"REDIS_PASSWORD_FILE": str(empty)}, capture_output=True, text=True, check=False
    )
    run("docker", "compose", "--project-name", "open", "down", "--volumes", check=False)
    require(
        done.returncode == 1 and "Ready to accept" not in done.stdout, f"{done.returncode} {done.stdout}{done.stderr}"
    )
    return "ended with 1"


def the_api_does_not_start_open_by_accident() -> str:
    """Start it without the setting that says it is meant: it ends and says why."""
    command = ["docker", "compose", "run", "--rm", "--no-deps", "-T", "-e", "HOURWRIGHT_NO_AUTH=", "api"]
    for setting in ("false", None):
        given = [part.replace("NO_AUTH=", f"NO_AUTH={setting}") for part in command] if setting else command
        if setting is None:
            image = inspected("api")["Config"]["Image"]
            given = ["docker", "run", "--rm", "-e", "HOURWRIGHT_HOST=0.0.0.0", image]
        done = subprocess.run(given, capture_output=True, text=True, check=False)
        require(done.returncode == 2 and "no API keys" in done.stderr, f"{done.returncode} {done.stdout}{done.stderr}")
    return "ended with 2"


def a_killed_worker_comes_back_and_its_job_ends() -> str:
    """Kill its process in the middle of a job: the container is started again, and so is the job."""
    began = submitted(documents.long(6))
    until(lambda: (job(began["id"]) or {}).get("state") == "running", "it runs", 20)
    time.sleep(1)
    killed = time.monotonic()
    os.kill(main_process("worker"), 9)
    done = ended(began["id"], 60)
    took = time.monotonic() - killed
    require((done["state"], done["attempt"]) == ("finished", 2), f"{done}")
    restarts = inspected("worker")["RestartCount"]
    require(restarts == 1, f"{restarts} restarts")
    until(lambda: inspected("worker")["State"]["Health"]["Status"] == "healthy", "the worker is healthy", 60)
    return f"attempt 2 ended {took:.1f} s after the kill, with a limit of 6 s"


def a_hanging_worker_is_seen() -> str:
    """Let a worker's process stand still: it turns unhealthy, and healthy when it goes on."""
    pid = main_process("urgent-worker")
    began = time.monotonic()
    os.kill(pid, 19)
    try:
        until(lambda: inspected("urgent-worker")["State"]["Health"]["Status"] == "unhealthy", "it is unhealthy", 90)
    finally:
        os.kill(pid, 18)
    took = time.monotonic() - began
    until(lambda: inspected("urgent-worker")["State"]["Health"]["Status"] == "healthy", "it is healthy", 60)
    return f"unhealthy after {took:.0f} s"


def a_killed_redis_loses_nothing() -> str:
    """Kill Redis: it comes back with what was accepted."""
    kept = submitted(documents.small(label="before the kill"), wait_seconds=30)
    os.kill(main_process("redis"), 9)
    record = until(lambda: job(kept["id"]), "Redis is back", 60)
    require(record["label"] == "before the kill" and record["state"] == "finished", f"{record}")
    done = submitted(documents.small(), wait_seconds=30)
    return f"the record is there, and a new job {done['state']}"


def a_stop_is_clean_and_loses_nothing() -> str:
    """Stop all in the middle of a job: each ends by itself and with 0; after a start the job ends."""
    began = submitted(documents.long(20))
    until(lambda: (job(began["id"]) or {}).get("state") == "running", "it runs", 20)
    taken = time.monotonic()
    compose("stop")
    took = time.monotonic() - taken
    for service in SERVICES:
        state = inspected(service)["State"]
        require((state["ExitCode"], state["OOMKilled"]) == (0, False), f"{service} ended with {state}")
    everything_reports_healthy()
    done = ended(began["id"], 90)
    require(done["state"] == "finished", f"{done}")
    return f"stopped in {took:.1f} s, all with 0; the job ended in attempt {done['attempt']}"


CHECKS = (
    everything_reports_healthy,
    a_job_is_planned_over_http,
    containers_are_confined,
    memory_and_processes_are_limited,
    the_password_is_nowhere_to_be_read,
    redis_is_out_of_reach,
    redis_does_not_start_without_a_password,
    the_api_does_not_start_open_by_accident,
    a_killed_worker_comes_back_and_its_job_ends,
    a_hanging_worker_is_seen,
    a_killed_redis_loses_nothing,
    a_stop_is_clean_and_loses_nothing,
)


@contextmanager
def taken_down() -> Iterator[None]:
    """Take all down afterwards, with its data; after a fault show what the containers said."""
    try:
        yield
    except DoesNotHold:
        print(compose("ps", "--all", check=False), compose("logs", "--tail", "30", check=False))
        raise
    finally:
        compose("down", "--volumes", "--timeout", "5", check=False)


def main() -> int:
    """Make every check, in order; the first that does not hold ends it."""
    with taken_down():
        for check in CHECKS:
            name = check.__name__.replace("_", " ")
            began = time.monotonic()
            try:
                seen = check()
            except DoesNotHold as fault:
                print(f"FAILED  {name}: {fault}", flush=True)
                raise
            print(f"ok      {name} [{time.monotonic() - began:.0f} s]: {seen}", flush=True)
    print(f"{len(CHECKS)} checks hold")
    return 0


if __name__ == "__main__":
    try:
        sys.exit(main())
    except DoesNotHold:
        sys.exit(1)
