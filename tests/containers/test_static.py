"""What the container files say, as far as their text tells it: an engine is not needed, and not used."""

import re
import subprocess
import tomllib

from service.processes import ONE_THREAD
from service.settings import Settings
from tests.house.files import ROOT
from workers.settings import Settings as WorkerSettings

DOCKERFILE = (ROOT / "Dockerfile").read_text(encoding="utf-8")
COMPOSE = (ROOT / "compose.yaml").read_text(encoding="utf-8")
IGNORE = [line for line in (ROOT / ".dockerignore").read_text(encoding="utf-8").splitlines() if line and line[0] != "#"]
VERSION = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]["version"]
INSTRUCTIONS = re.sub(r"(?m)^#.*\n", "", DOCKERFILE).replace("\\\n", " ").splitlines()


def instructions(word: str) -> list[str]:
    """Return what follows a word at the start of the Dockerfile's instructions."""
    return [line.removeprefix(word).strip() for line in INSTRUCTIONS if line.startswith(f"{word} ")]


def test_the_image_runs_as_a_user_by_number_who_is_not_root() -> None:
    *_, user = instructions("USER")
    assert re.fullmatch(r"[1-9]\d+:[1-9]\d+", user)
    assert max(INSTRUCTIONS.index(line) for line in INSTRUCTIONS if line.startswith(("RUN", "COPY"))) < max(
        INSTRUCTIONS.index(line) for line in INSTRUCTIONS if line.startswith("USER")
    )


def test_only_locked_wheels_are_installed_and_then_ourselves_from_no_index() -> None:
    installs = [line for line in instructions("RUN") if " install " in line]
    assert len(installs) == 2
    assert "--require-hashes --only-binary=:all: -r requirements.txt" in installs[0]
    assert "--no-deps --no-build-isolation --no-index ." in installs[1]


def test_no_secret_and_no_registry_stands_in_the_image() -> None:
    assert not [line for line in instructions("ENV") + instructions("ARG") if re.search(r"PASS|SECRET|TOKEN|KEY", line)]
    assert instructions("ADD") == []
    assert instructions("ARG") == ["BASE=python:3.12-slim-bookworm"]
    assert all(source.split()[0] == "${BASE}" for source in instructions("FROM"))


def test_commands_and_health_checks_are_run_without_a_shell() -> None:
    (command,), (check,) = instructions("CMD"), instructions("HEALTHCHECK")
    assert command == '["hourwright", "serve"]'
    assert check.endswith('CMD ["python", "-I", "-m", "service.health_check"]')


def test_numerical_libraries_keep_to_one_thread_as_a_worker_asks_of_them() -> None:
    (environment,) = [line for line in instructions("ENV") if "OPENBLAS" in line]
    assert set(ONE_THREAD.items()) <= {tuple(part.split("=", 1)) for part in environment.split()}


def test_the_engine_is_sent_what_is_listed_and_nothing_else() -> None:
    assert IGNORE[0] == "*"
    listed = {line[1:] for line in IGNORE if line.startswith("!")}
    assert listed == {"schemas", "service", "workers", "pyproject.toml", "requirements.txt", "README.md", "LICENSE"}
    copied = {part for line in instructions("COPY") if "--from" not in line for part in line.split()[:-1]}
    assert copied == listed


def test_image_and_package_have_one_version() -> None:
    assert set(re.findall(r"hourwright:([\d.]+)", COMPOSE + DOCKERFILE)) == {VERSION}
    assert f'image.version="{VERSION}"' in DOCKERFILE


def test_every_setting_in_the_deployment_is_one() -> None:
    named = set(re.findall(r"\bHOURWRIGHT_([A-Z_]+)(?=:)", COMPOSE))
    assert {"REDIS_URL", "REDIS_PASSWORD_FILE", "HOST", "PORT", "NO_AUTH", "QUEUE"} <= named
    assert named <= {name.upper() for name in Settings.model_fields.keys() | WorkerSettings.model_fields.keys()}


def test_what_says_that_it_is_open_stands_beside_a_port_on_loopback() -> None:
    assert re.findall(r"ports: (.*)", COMPOSE) == ['["127.0.0.1:${API_PORT:-8080}:8080"]']
    assert "OPEN TO WHOEVER REACHES THE PORT" in COMPOSE


def test_the_password_is_ignored_by_version_control_and_not_sent_to_the_engine() -> None:
    assert "file: ${REDIS_PASSWORD_FILE:-./secrets/redis_password}" in COMPOSE
    assert "secrets" in (ROOT / ".gitignore").read_text(encoding="utf-8").split()
    assert "!secrets" not in IGNORE


def test_the_shell_reads_every_script_without_a_fault() -> None:
    scripts = sorted((ROOT / "tests" / "containers").glob("*.sh"))
    assert len(scripts) == 5
    for script in scripts:
        outcome = subprocess.run(["bash", "-n", script], capture_output=True, text=True, check=False)
        assert (outcome.returncode, outcome.stderr) == (0, ""), script
