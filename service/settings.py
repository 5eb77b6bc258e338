"""Every knob of the service, read once from the environment, with its unit in its name.

A setting ``data`` is the variable ``LANEWRIGHT_DATA``. Nothing here touches the disk or the
database: ``main.py`` reads the settings and hands their values to what needs them.
"""

import ipaddress
from pathlib import Path
from typing import Annotated, Self

from pydantic import Field, ValidationError, field_validator, model_validator
from pydantic_settings import BaseSettings, SettingsConfigDict

from service.runs.lifecycle import CRASHES_MAX

MEBIBYTE = 2**20
GIBIBYTE = 2**30
PREFIX = "LANEWRIGHT_"

# psycopg 3 is the one PostgreSQL driver that is installed, so the short scheme means it.
_DRIVERS = {
    "sqlite": "sqlite",
    "postgresql": "postgresql+psycopg",
    "postgresql+psycopg": "postgresql+psycopg",
}


class SettingsError(Exception):
    """The environment holds a setting that cannot be used; the text names each, a line apiece."""


class Settings(BaseSettings):
    """The settings of one process."""

    model_config = SettingsConfigDict(env_prefix=PREFIX, extra="ignore", frozen=True)

    data: Path = Path("lanewright-data")
    database: str | None = None
    # Until there are keys nobody is identified, so nobody from outside may come in.
    host: str = "127.0.0.1"
    # 0 lets the system choose a free one, which the start of the service then prints.
    port: Annotated[int, Field(ge=0, le=65535)] = 8080

    body_wire_bytes_max: Annotated[int, Field(ge=1024)] = 128 * MEBIBYTE
    body_unpacked_bytes_max: Annotated[int, Field(ge=1024)] = GIBIBYTE
    nesting_max: Annotated[int, Field(ge=4, le=64)] = 16

    intake_slots: Annotated[int, Field(ge=1, le=64)] = 1
    intake_seconds_max: Annotated[int, Field(ge=1, le=900)] = 60
    intake_memory_bytes_max: Annotated[int, Field(ge=256 * MEBIBYTE)] = 4 * GIBIBYTE

    # A child that has only loaded the solver has mapped 270 MB.
    plan_memory_bytes_max: Annotated[int, Field(ge=512 * MEBIBYTE)] = 8 * GIBIBYTE
    # What planned runs leave for the next ones to start from; a cache, for each tenant; 0 for none.
    warm_start_bytes_max: Annotated[int, Field(ge=0)] = 256 * MEBIBYTE
    crashes_max: Annotated[int, Field(ge=1, le=10)] = CRASHES_MAX
    lease_seconds: Annotated[int, Field(ge=3, le=600)] = 30
    # How often a lease is renewed, and the pause after a run was given back.
    poll_seconds: Annotated[float, Field(gt=0, le=60)] = 0.5
    log_level: Annotated[str, Field(pattern="^(debug|info|warning|error)$")] = "info"

    @field_validator("host")
    @classmethod
    def _loopback_only(cls, value: str) -> str:
        """Refuse an address that other machines could reach."""
        if value == "localhost":
            return "127.0.0.1"
        try:
            address = ipaddress.ip_address(value)
        except ValueError as error:
            raise ValueError("is not an address; use 127.0.0.1 or ::1") from error
        if not address.is_loopback:
            raise ValueError("is not a loopback address; until there are keys, use 127.0.0.1")
        return value

    @field_validator("database")
    @classmethod
    def _known_driver(cls, value: str | None) -> str | None:
        """Refuse a database that the store was never tested on; write its driver out."""
        if value is None:
            return None
        scheme, _, rest = value.partition("://")
        if not rest or scheme not in _DRIVERS or (scheme == "sqlite" and rest[:1] != "/"):
            raise ValueError("must be sqlite:///FILE or postgresql://USER@HOST/NAME")
        return f"{_DRIVERS[scheme]}://{rest}"

    @model_validator(mode="after")
    def _unpacked_holds_wire(self) -> Self:
        """Refuse limits under which a body that was let in could never be unpacked."""
        if self.body_unpacked_bytes_max < self.body_wire_bytes_max:
            raise ValueError(
                f"{PREFIX}BODY_UNPACKED_BYTES_MAX is below {PREFIX}BODY_WIRE_BYTES_MAX; "
                "raise the first or lower the second"
            )
        return self

    @property
    def database_url(self) -> str:
        """Return the database in use: the one that was named, else a file in the data folder."""
        return self.database or f"sqlite:///{self.data / 'lanewright.db'}"


def read_settings() -> Settings:
    """Read the settings from the environment.

    Raises ``SettingsError`` with one line for each variable that cannot be used. The value itself
    is not repeated: a database URL may hold a password.
    """
    try:
        return Settings()
    except ValidationError as error:
        lines = []
        for fault in error.errors(include_url=False, include_input=False):
            place = "".join(str(part) for part in fault["loc"]).upper()
            message = fault["msg"].removeprefix("Value error, ")
            lines.append(f"{PREFIX}{place}: {message}" if place else message)
        raise SettingsError("\n".join(lines)) from error
