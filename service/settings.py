"""The operator's settings: environment variables with the prefix WELLPOSED_, typed, in one place."""

import os
from pathlib import Path
from typing import Any

from pydantic import AnyHttpUrl, Field
from pydantic_settings import BaseSettings, SettingsConfigDict

from service.jobs import machine

MIB = 1024 * 1024


def _state_folder() -> Path:
    stated = Path(os.environ.get("XDG_STATE_HOME", ""))
    # The XDG rules have relative paths ignored.
    return (stated if stated.is_absolute() else Path.home() / ".local" / "state") / "wellposed"


def _database(settings: dict[str, Any]) -> str:
    return f"sqlite:///{settings['state'] / 'jobs-1.sqlite3'}"


def _memory_per_job(settings: dict[str, Any]) -> int:
    return max(512 * MIB, int(0.8 * machine.memory() / settings["workers"]))


class Settings(BaseSettings):
    """Everything an operator can set; each field is read from ``WELLPOSED_<NAME>``.

    Raises ``pydantic.ValidationError`` when a value in the environment cannot be used.
    """

    model_config = SettingsConfigDict(env_prefix="WELLPOSED_", frozen=True)

    state: Path = Field(
        default_factory=_state_folder,
        description="Folder for the default database and the logs of jobs.",
    )
    database: str = Field(
        default_factory=_database,
        description="SQLAlchemy URL of the job store; SQLite or PostgreSQL.",
    )
    processes: str = Field(
        default="service.processes.registry:PROCESSES",
        pattern=r"^[\w.]+:\w+$",
        description="Where the processes are found, module:name; children import the same.",
    )
    workers: int = Field(
        default_factory=machine.cores, ge=1, description="Jobs computed at the same time; default: cores."
    )
    memory_bytes: int = Field(
        default_factory=_memory_per_job,
        ge=64 * MIB,
        description="Resident memory one job may use, bytes; default: 80 % of the machine over the workers.",
    )
    wall_seconds: float = Field(
        default=3660.0, gt=0, description="Wall-clock time no job may exceed, seconds, whatever it asks for."
    )
    grace_seconds: float = Field(
        default=5.0, ge=0, description="Seconds a job gets beyond its own limit before it is killed."
    )
    sync_seconds: float = Field(
        default=60.0, gt=0, description="Longest wait of a synchronous execution, seconds; then 504."
    )
    lease_seconds: float = Field(
        default=6.0, gt=0, description="Seconds after which the jobs of a silent service are taken over."
    )
    attempts: int = Field(
        default=3, ge=1, description="How often a job is started when the service dies under it."
    )
    retention_hours: float = Field(
        default=168.0, gt=0, description="Hours a finished job and its results are kept."
    )
    body_bytes: int = Field(default=4 * MIB, ge=1024, description="Largest request body, bytes.")
    public_url: AnyHttpUrl | None = Field(
        default=None,
        description="Root of every link sent out; default: what the client asked for.",
    )
    cors_origins: tuple[str, ...] = Field(
        default=(), description="Origins of web pages that may call the service, as a JSON list."
    )
