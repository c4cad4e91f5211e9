"""Settings: one table, read from the environment (``DENSITYLOOM_…``) at start."""

from __future__ import annotations

import os
import re
from pathlib import Path
from typing import Literal

import platformdirs
from pydantic import Field, field_validator
from pydantic_settings import BaseSettings, SettingsConfigDict

PREFIX = "DENSITYLOOM_"
_ORIGIN = re.compile(r"https?://(?:[a-z0-9_.-]+|\[[0-9a-f:.]+\])(?::[0-9]{1,5})?")
_HOST = re.compile(r"[a-z0-9_.-]+|[0-9a-f:.]+")


def _cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


class Settings(BaseSettings):
    """What an operator can set; README lists the same table."""

    model_config = SettingsConfigDict(env_prefix=PREFIX, extra="forbid", frozen=True)

    compute_workers: int = Field(
        default_factory=lambda: min(2, _cores()),
        ge=1,
        description="processes that compute, for each server process",
    )
    compute_threads: int = Field(
        default_factory=lambda: max(1, _cores() // min(2, _cores())), ge=1, description="threads of each"
    )
    queue: int = Field(16, ge=0, description="requests that may wait for a free worker; beyond it 503")
    request_seconds: float = Field(
        120.0, gt=0, le=86_400, description="longest computation of one request; beyond it 504"
    )
    max_body_bytes: int = Field(128 * 2**20, ge=1024, description="longest request body; beyond it 413")
    max_coefficients: int = Field(2_000_000, ge=1, description="rows of one set")
    max_samples: int = Field(2**28, ge=1, description="samples of one answer")
    max_json_values: int = Field(5_000_000, ge=1, description="numbers in a JSON or CSV answer")
    max_memory_bytes: int = Field(2 * 2**30, ge=2**20, description="values and workspace of one request")
    data_dir: Path = Field(
        default_factory=lambda: platformdirs.user_data_path("densityloom", appauthor=False),
        description="folder of the store's embedded database, on a local disk",
    )
    database_url: str | None = Field(None, description="PostgreSQL database for the store instead, postgresql://…")
    max_sets: int = Field(10_000, ge=0, description="sets in the store; beyond it 507")
    max_store_bytes: int = Field(10 * 2**30, ge=0, description="their bytes; beyond it 507")
    cache_bytes: int = Field(
        128 * 2**20, ge=0, description="answers about stored sets kept in memory, of each server process"
    )
    set_cache_bytes: int = Field(256 * 2**20, ge=0, description="stored sets kept ready, in each computing process")
    require_keys: bool | None = Field(
        None,
        description="whether requests need an API key; unset: `densityloom serve` asks for none on this machine's own "
        "address, and for one on any other",
    )
    allowed_hosts: str = Field(
        "",
        description="names, by commas, that the service may be called by without keys, besides this machine's own; "
        "else 421",
    )
    cors_origins: str = Field(
        "", description="origins, by commas, whose pages may use the service from a browser, https://…"
    )
    requests_per_minute: int = Field(
        30_000,
        ge=0,
        description="of one key, or one address without a key, to each server process; beyond it 429; 0: no limit",
    )
    total_requests_per_minute: int = Field(
        0, ge=0, description="of all together, to each server process; beyond it 429; 0: no limit"
    )
    concurrent_per_key: int = Field(
        12,
        ge=1,
        description="requests of one key, or of one other machine without a key, that are computed or wait for it; "
        "beyond it 429",
    )
    max_inflight_bytes: int = Field(
        4 * 2**30, ge=2**20, description="bodies on their way in and answers on their way out; beyond it 503"
    )
    body_seconds: float = Field(
        60.0, gt=0, le=86_400, description="grace for a body, which must then come at 64 KiB/s or faster; else 408"
    )
    send_seconds: float = Field(
        60.0, gt=0, le=86_400, description="longest that a client may take for one MiB of its answer; else it is cut"
    )
    stop_seconds: float = Field(
        10.0, ge=0, le=3600, description="time to finish what is under way when the service is told to stop"
    )
    log_format: Literal["auto", "json", "text"] = Field(
        "auto", description="of the log on standard error; auto: text on a terminal, else JSON"
    )
    log_level: Literal["debug", "info", "warning", "error"] = Field("info", description="least that is logged")

    @field_validator("data_dir", mode="before")
    @classmethod
    def _folder(cls, given: object) -> object:
        if given == "":
            raise ValueError("is empty; name a folder")
        return given

    @field_validator("database_url")
    @classmethod
    def _server(cls, text: str | None) -> str | None:
        if text is not None and not text.startswith("postgresql://"):
            raise ValueError("is no address of a PostgreSQL database; give postgresql://user@host:port/name")
        return text

    @field_validator("cors_origins")
    @classmethod
    def _origins(cls, text: str) -> str:
        for one in listed(text):
            if not _ORIGIN.fullmatch(one):
                raise ValueError(f"{one[:80]!r} is no origin; give such as https://dashboard.example.org, by commas")
        return text

    @field_validator("allowed_hosts")
    @classmethod
    def _hosts(cls, text: str) -> str:
        for one in listed(text):
            if not _HOST.fullmatch(one):
                raise ValueError(f"{one[:80]!r} is no name of a host; give such as density.example.org, without a port")
        return text


def listed(text: str) -> tuple[str, ...]:
    """The items of a setting that holds several, in small letters."""
    return tuple(item.strip().lower() for item in text.split(",") if item.strip())


def load_settings() -> Settings:
    """Settings from the environment.

    Raises
    ------
    ValueError
        A value is out of range, or a variable with our prefix names no setting: a misspelt limit
        must not pass for a set one.
    """
    known = {f"{PREFIX}{name.upper()}" for name in Settings.model_fields}
    unknown = sorted(name for name in os.environ if name.upper().startswith(PREFIX) and name.upper() not in known)
    if unknown:
        raise ValueError(f"unknown setting {unknown[0]}; the settings are {', '.join(sorted(known))}")
    return Settings()
