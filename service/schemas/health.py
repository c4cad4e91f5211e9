"""Answers of the health endpoints."""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel


class Live(BaseModel):
    """The process answers."""

    status: Literal["live"]
    version: str


class Ready(BaseModel):
    """The workers have started."""

    status: Literal["ready"]
    version: str
    workers: int
    busy: int
    waiting: int
    libraries: dict[str, str]
