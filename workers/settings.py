"""What workers and keepers are told by their surroundings: read once at start, into one frozen object."""

import os
from collections.abc import Mapping
from pathlib import Path
from typing import Literal

from pydantic import Field
from pydantic_settings import BaseSettings, SettingsConfigDict

PREFIX = "HOURWRIGHT_"
SERVICES_OWN = frozenset(
    {"host", "port", "allowed_hosts", "trusted_proxy", "no_auth", "http_threads", "drain_seconds"}
    | {"retention_days", "idempotency_hours", "longest_queue", "memory_share", "revisions_kept"}
)
"""Settings of the API: one file of settings may serve every process, so they are known here."""


class UnknownSetting(ValueError):  # noqa: N818 - says what it is
    """A variable of the environment looks like a setting, but is none."""


class Settings(BaseSettings):
    """Settings of a worker or a keeper; each is an environment variable `HOURWRIGHT_<NAME>`."""

    model_config = SettingsConfigDict(env_prefix=PREFIX, frozen=True, extra="forbid")

    redis_url: str = "redis://127.0.0.1:6379/0"
    redis_password_file: Path | None = Field(default=None, description="File that holds the password of Redis")
    key_prefix: str = Field(default="hourwright", pattern=r"^[A-Za-z0-9_.-]{1,40}$")

    queue: Literal["jobs", "urgent"] = "jobs"
    threads: int = Field(default=1, ge=1, le=1024, description="Independent parts of one job solved side by side")
    grace_seconds: float = Field(default=10.0, ge=0, le=3600, description="What a running job may still take at a stop")

    @property
    def redis_password(self) -> str | None:
        """Read the password from its file, without the line end."""
        return self.redis_password_file.read_text(encoding="utf-8").strip() if self.redis_password_file else None


def settings(environment: Mapping[str, str] = os.environ) -> Settings:
    """Read the settings; raises UnknownSetting, or pydantic's ValidationError for a value out of range."""
    known = {name.upper() for name in Settings.model_fields.keys() | SERVICES_OWN}
    named = {name for name in environment if name.upper().startswith(PREFIX)}
    if unknown := sorted(name for name in named if name.upper().removeprefix(PREFIX) not in known):
        raise UnknownSetting(f"no such setting: {', '.join(unknown)}")
    return Settings()
