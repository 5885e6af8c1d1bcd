"""What the service is told by its surroundings: read once at start, into one frozen object."""

import os
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated

from pydantic import Field, field_validator
from pydantic_settings import BaseSettings, NoDecode, SettingsConfigDict

PREFIX = "HOURWRIGHT_"
WORKERS_OWN = frozenset({"queue", "threads", "grace_seconds"})
"""Settings of workers and keepers: one file of settings may serve every process, so they are known here."""


class UnknownSetting(ValueError):  # noqa: N818 - says what it is
    """A variable of the environment looks like a setting, but is none."""


class Settings(BaseSettings):
    """Settings of the API; each is an environment variable `HOURWRIGHT_<NAME>`."""

    model_config = SettingsConfigDict(env_prefix=PREFIX, frozen=True, extra="forbid")

    redis_url: str = "redis://127.0.0.1:6379/0"
    redis_password_file: Path | None = Field(default=None, description="File that holds the password of Redis")
    key_prefix: str = Field(default="hourwright", pattern=r"^[A-Za-z0-9_.-]{1,40}$")

    host: str = "127.0.0.1"
    port: int = Field(default=8080, ge=0, le=65535)
    allowed_hosts: Annotated[tuple[str, ...], NoDecode] = Field(default=(), description="Between commas; none: any")
    trusted_proxy: str | None = None
    no_auth: bool = Field(default=False, description="Serve without API keys, which is all that this version can do")
    http_threads: int = Field(default=64, ge=4, le=1024)
    drain_seconds: float = Field(default=30.0, ge=0, le=3600)

    retention_days: float = Field(default=7.0, gt=0, le=3660)
    idempotency_hours: float = Field(default=24.0, gt=0, le=8784)
    longest_queue: int = Field(default=10_000, ge=1, le=1_000_000)
    memory_share: float = Field(default=0.7, gt=0, lt=1, description="Share of Redis's memory above which 503 is said")
    revisions_kept: int = Field(default=1_000, ge=1, le=100_000)

    @field_validator("allowed_hosts", mode="before")
    @classmethod
    def _between_commas(cls, value: object) -> object:
        return tuple(name.strip() for name in value.split(",") if name.strip()) if isinstance(value, str) else value

    @property
    def redis_password(self) -> str | None:
        """Read the password from its file, without the line end."""
        return self.redis_password_file.read_text(encoding="utf-8").strip() if self.redis_password_file else None


def settings(environment: Mapping[str, str] = os.environ) -> Settings:
    """Read the settings; raises UnknownSetting, or pydantic's ValidationError for a value out of range."""
    known = {name.upper() for name in Settings.model_fields.keys() | WORKERS_OWN}
    named = {name for name in environment if name.upper().startswith(PREFIX)}
    if unknown := sorted(name for name in named if name.upper().removeprefix(PREFIX) not in known):
        raise UnknownSetting(f"no such setting: {', '.join(unknown)}")
    return Settings()
