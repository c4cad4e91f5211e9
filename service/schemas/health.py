"""Answers of the health endpoints."""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, ConfigDict, Field


class Live(BaseModel):
    """The process answers."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"status": "live", "version": "0.1.0"}]})

    status: Literal["live"]
    version: str


class Ready(BaseModel):
    """The workers have started."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "status": "ready",
                    "version": "0.1.0",
                    "workers": 2,
                    "busy": 0,
                    "waiting": 0,
                    "store": "SQLite 3.53.4 (pysqlite3), write-ahead log, every commit synchronised",
                    "libraries": {"numpy": "2.4.6", "finufft": "2.5.1"},
                }
            ]
        }
    )

    status: Literal["ready"]
    version: str
    workers: int
    busy: int
    waiting: int
    store: str = Field(description="the database under the stored sets, and how it keeps what is committed")
    libraries: dict[str, str]
