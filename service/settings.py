"""What an operator can set, read once from the environment as SHUNTBOOK_….

Bounds that clients rely on are not settings; they stand beside what they bound.
"""

from __future__ import annotations

from collections.abc import Mapping

from pydantic import BaseModel, ConfigDict, Field

PREFIX = "SHUNTBOOK_"


class Settings(BaseModel):
    """One field, one environment variable."""

    model_config = ConfigDict(frozen=True, extra="forbid")

    database_url: str = Field(
        default="sqlite:///shuntbook.db", description="SQLite file or PostgreSQL database, as a URL"
    )
    host: str = Field(default="127.0.0.1", description="address that `serve` listens on")
    port: int = Field(default=8000, ge=0, le=65535, description="port that `serve` listens on")
    threads: int = Field(
        default=40,
        ge=1,
        le=500,
        description="requests worked on at once in a process, each with a connection",
    )
    log_level: str = Field(
        default="info", pattern="^(debug|info|warning|error)$", description="least grave line that is logged"
    )


def from_environment(environment: Mapping[str, str]) -> Settings:
    """Settings from variables with the prefix; pydantic's ValidationError names one that does not fit."""
    given = {name: environment.get(f"{PREFIX}{name.upper()}") for name in Settings.model_fields}
    return Settings.model_validate({name: value for name, value in given.items() if value is not None})
