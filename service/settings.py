"""Settings: one table, read from the environment (``DENSITYLOOM_…``) at start."""

from __future__ import annotations

import os

from pydantic import Field
from pydantic_settings import BaseSettings, SettingsConfigDict

PREFIX = "DENSITYLOOM_"


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
