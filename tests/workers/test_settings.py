"""Settings of workers and of the service, which one file may hold together."""

from pathlib import Path

import pytest
from pydantic import ValidationError

import service.settings
import workers.settings


def test_each_side_knows_the_names_of_the_other() -> None:
    service_names = service.settings.Settings.model_fields.keys()
    worker_names = workers.settings.Settings.model_fields.keys()
    assert service_names - worker_names == workers.settings.SERVICES_OWN
    assert worker_names - service_names == service.settings.WORKERS_OWN


@pytest.mark.parametrize("side", [service.settings, workers.settings], ids=["service", "workers"])
def test_a_misspelt_setting_is_refused_by_name(side: object) -> None:
    with pytest.raises(ValueError, match="HOURWRIGHT_REDIS_ULR"):
        side.settings({"HOURWRIGHT_REDIS_ULR": "unix:///x", "PATH": "/bin"})  # type: ignore[attr-defined]


def test_a_value_out_of_range_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("HOURWRIGHT_THREADS", "0")
    with pytest.raises(ValidationError):
        workers.settings.settings()


def test_settings_come_from_the_environment_and_the_password_from_a_file(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    secret = tmp_path / "password"
    secret.write_text("open sesame\n", encoding="utf-8")
    monkeypatch.setenv("HOURWRIGHT_REDIS_PASSWORD_FILE", str(secret))
    monkeypatch.setenv("HOURWRIGHT_QUEUE", "urgent")
    monkeypatch.setenv("HOURWRIGHT_ALLOWED_HOSTS", "a.example, b.example")
    assert workers.settings.settings().redis_password == "open sesame"
    assert workers.settings.settings().queue == "urgent"
    assert service.settings.settings().redis_password == "open sesame"
    assert service.settings.settings().allowed_hosts == ("a.example", "b.example")


def test_what_was_read_does_not_change() -> None:
    with pytest.raises(ValidationError):
        workers.settings.Settings().threads = 2  # type: ignore[misc]
