"""What can be set from outside: environment variables with the prefix CURVEWRIGHT_, overridden by the command line.

`Settings()` reads the environment; `Settings(port=0, data=path)` overrides single values.  A record is never changed.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ConfigDict, Field, model_validator

PREFIX = "CURVEWRIGHT_"


def _data_directory() -> Path:
    base = os.environ.get("XDG_DATA_HOME") or Path.home() / ".local" / "share"
    return Path(base) / "curvewright"


def _usable_cores() -> int:
    return max(1, len(os.sched_getaffinity(0)))


class Settings(BaseModel):
    """Where to keep data, where to listen, how much a run may take."""

    model_config = ConfigDict(frozen=True, extra="forbid")

    data: Path = Field(default_factory=_data_directory, description="directory of the database; made when missing")
    database: str = Field("", description="database address; empty: SQLite in the data directory")
    host: str = Field("127.0.0.1", description="address to listen on")
    port: int = Field(8710, ge=0, le=65535, description="port to listen on; 0: any free one")
    open: bool = Field(False, description="allow an address beyond this machine although there are no keys")
    hosts: str = Field("", description="further names of this server, separated by commas; `*`: any name")
    workers: int = Field(default_factory=_usable_cores, ge=1, le=256, description="runs solved at the same time")

    body_bytes: int = Field(256 * 1024, ge=1024, description="largest request body")
    queue: int = Field(1000, ge=1, description="most runs waiting at the same time")
    wait_seconds: float = Field(60.0, ge=0, description="longest `Prefer: wait` that is granted")
    disk_reserve_mb: int = Field(20, ge=0, description="free disk below which no run is accepted")

    longest_solve: float = Field(3600.0, gt=0, description="most seconds a run may take, whatever its document says")
    wall_grace: float = Field(10.0, gt=0, description="seconds after a run's time limit when its worker is killed")
    cancel_grace: float = Field(0.5, gt=0, description="seconds a run has to stop by itself after a cancel")
    memory_mb: int = Field(1024, ge=128, description="most resident memory of the worker of a run")
    understand_seconds: float = Field(5.0, gt=0, description="most seconds for the necessary conditions in symbols")
    attempts: int = Field(3, ge=1, description="a run whose worker died this often is failed")
    lease_seconds: float = Field(30.0, gt=0, description="a claim not renewed for so long is open to others")

    @model_validator(mode="before")
    @classmethod
    def _over_the_environment(cls, given: dict[str, Any]) -> dict[str, Any]:
        environment = {name: os.environ.get(PREFIX + name.upper()) for name in cls.model_fields}
        return {name: text for name, text in environment.items() if text is not None} | given

    @property
    def database_url(self) -> str:
        """Address of the database in SQLAlchemy's form."""
        return self.database or f"sqlite:///{self.data.absolute() / 'curvewright.sqlite3'}"

    @property
    def loopback(self) -> bool:
        """True where only this machine can reach `host`."""
        return self.host in ("127.0.0.1", "::1", "localhost")
