"""What the HTTP side can be set to; read once at start and never changed."""

from dataclasses import dataclass

MEBIBYTE = 1024 * 1024


@dataclass(frozen=True)
class WebSettings:
    """Limits and addresses of the HTTP side; no allowed hosts: any well-formed `Host` is served."""

    host: str = "127.0.0.1"
    port: int = 8080
    allowed_hosts: tuple[str, ...] = ()
    trusted_proxy: str | None = None
    threads: int = 64
    connection_limit: int = 1000
    idle_seconds: int = 60
    drain_seconds: float = 30.0
    waiters: int = 32
    longest_wait_seconds: int = 30
    max_body_bytes: int = 64 * MEBIBYTE
    max_inflated_bytes: int = 256 * MEBIBYTE
    max_uri_bytes: int = 8 * 1024
    max_header_bytes: int = 16 * 1024
    large_bodies_at_once: int = 2
