"""Settings of a server, from environment variables that begin with ``SOJOURN_``."""

from __future__ import annotations

import os
import secrets
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from estimators import (
    DEFAULT_LOCATION_ERROR_SD_M,
    DEFAULT_LONGEST_BRIDGED_GAP_HOURS,
    DEFAULT_MINIMUM_STAY_HOURS,
    CalendarError,
    reporting_zone,
)

ADMIN_KEY_FILE = "admin.key"


class SettingsError(ValueError):
    """One or more settings cannot be used; the message names each, what was got and what to do."""


@dataclass(frozen=True)
class Settings:
    """How one server runs.

    Attributes
    ----------
    host, port : str, int, where the server listens; port 0 takes a free one
    data : Path, the data directory
    admin_key : str or None, None until :meth:`with_admin_key` has found or made one
    time_zone : str, IANA name of the reporting time zone
    workers : int, processes that compute
    body_limit_mb : int, largest request body, in units of 1,000,000 bytes
    longest_bridged_gap_hours, minimum_stay_hours, default_error_sd_m : float, used where an animal states none
    task_deadline_s : int, longest time that one animal may take to compute
    """

    host: str = "127.0.0.1"
    port: int = 8000
    data: Path = Path("sojourn-data")
    admin_key: str | None = None
    time_zone: str = "UTC"
    workers: int = 1
    body_limit_mb: int = 500
    longest_bridged_gap_hours: float = DEFAULT_LONGEST_BRIDGED_GAP_HOURS
    minimum_stay_hours: float = DEFAULT_MINIMUM_STAY_HOURS
    default_error_sd_m: float = DEFAULT_LOCATION_ERROR_SD_M
    task_deadline_s: int = 3600

    @property
    def body_limit_bytes(self) -> int:
        """Largest request body in bytes."""
        return self.body_limit_mb * 1_000_000

    @classmethod
    def from_environment(cls, environment: Mapping[str, str]) -> Settings:
        """Settings from environment variables; an empty value counts as none.

        Raises
        ------
        SettingsError
            Values cannot be used; all of them are named.
        """
        values: dict[str, Any] = {"workers": os.cpu_count() or 1}
        known = {setting.name for setting in SETTINGS}
        faults = [
            f"{name} is no setting. The settings are {', '.join(sorted(known))}."
            for name in sorted(environment)
            if name.startswith("SOJOURN_") and name not in known
        ]
        for setting in SETTINGS:
            text = environment.get(setting.name, "")
            if not text:
                continue
            try:
                values[setting.field] = setting.read(text)
            except (ValueError, CalendarError) as fault:
                got = "a value" if setting.field == "admin_key" else repr(text[:60])
                faults.append(f"{setting.name} cannot be {got}: {fault}")
        if faults:
            raise SettingsError("\n".join(faults))
        return cls(**values)

    def with_admin_key(self) -> Settings:
        """These settings with the admin key: the one given, the one in the data directory, or a new one kept there.

        Raises
        ------
        SettingsError
            The file of the key cannot be read or written, or holds no key.
        """
        if self.admin_key:
            return self
        path = self.data / ADMIN_KEY_FILE
        try:
            if not path.exists():
                self.data.mkdir(mode=0o700, parents=True, exist_ok=True)
                _write_private(path, secrets.token_urlsafe(32))
            return replace(self, admin_key=_key(path.read_text("ascii").strip()))
        except OSError as fault:
            reason = f"{fault.strerror}. Give the server the right to read and write it"
        except ValueError:
            reason = "it holds no key of at least 8 printable ASCII characters. Remove it to have a new key written"
        raise SettingsError(f"The key in {path} cannot be used: {reason}, or set SOJOURN_ADMIN_KEY.")


def _write_private(path: Path, text: str) -> None:
    # Written aside and renamed, so that a start that dies half-way leaves no empty key behind.
    aside = path.with_name(path.name + ".new")
    aside.unlink(missing_ok=True)
    with os.fdopen(os.open(aside, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600), "w", encoding="utf-8") as file:
        file.write(text + "\n")
        file.flush()
        os.fsync(file.fileno())
    aside.replace(path)


def _whole(lowest: int, highest: int) -> Callable[[str], int]:
    def read(text: str) -> int:
        if not (text.isdecimal() and text.isascii() and lowest <= int(text) <= highest):
            raise ValueError(f"give a whole number from {lowest} to {highest}.")
        return int(text)

    return read


def _number(lowest: float, highest: float) -> Callable[[str], float]:
    def read(text: str) -> float:
        try:
            value = float(text)
        except ValueError:
            value = float("nan")
        if not lowest <= value <= highest:
            raise ValueError(f"give a number from {lowest:g} to {highest:.7g}.")
        return value

    return read


def _time_zone(text: str) -> str:
    reporting_zone(text)
    return text


def _key(text: str) -> str:
    if len(text) < 8 or not text.isascii() or not text.isprintable() or " " in text:
        raise ValueError("give at least 8 printable ASCII characters without spaces.")
    return text


@dataclass(frozen=True)
class Setting:
    """One environment variable: its name, the field it sets, its default in words, and what it means."""

    name: str
    field: str
    default: str
    meaning: str
    read: Callable[[str], Any]


SETTINGS: tuple[Setting, ...] = (
    Setting("SOJOURN_HOST", "host", "127.0.0.1", "Address to listen on.", str),
    Setting("SOJOURN_PORT", "port", "8000", "Port to listen on; 0 takes a free one.", _whole(0, 65535)),
    Setting("SOJOURN_DATA", "data", "sojourn-data", "Data directory; made if it is not there.", Path),
    Setting(
        "SOJOURN_ADMIN_KEY",
        "admin_key",
        "written to admin.key in the data directory",
        "Bearer key that may do everything.",
        _key,
    ),
    Setting(
        "SOJOURN_TIME_ZONE", "time_zone", "UTC", "Reporting time zone (IANA name) that months are cut in.", _time_zone
    ),
    Setting("SOJOURN_WORKERS", "workers", "number of processors", "Processes that compute.", _whole(1, 256)),
    Setting(
        "SOJOURN_BODY_LIMIT_MB", "body_limit_mb", "500", "Largest request body, in MB of 10⁶ bytes.", _whole(1, 100_000)
    ),
    Setting(
        "SOJOURN_LONGEST_BRIDGED_GAP_HOURS",
        "longest_bridged_gap_hours",
        f"{DEFAULT_LONGEST_BRIDGED_GAP_HOURS:g}",
        "Longest time between two fixes that is bridged, for animals that state none.",
        _number(0.01, 8784.0),
    ),
    Setting(
        "SOJOURN_MINIMUM_STAY_HOURS",
        "minimum_stay_hours",
        f"{DEFAULT_MINIMUM_STAY_HOURS:g}",
        "Shortest stay that counts as a visit.",
        _number(0.0, 8784.0),
    ),
    Setting(
        "SOJOURN_DEFAULT_ERROR_SD_M",
        "default_error_sd_m",
        f"{DEFAULT_LOCATION_ERROR_SD_M:g}",
        "Standard deviation per axis, in metres, of a fix without an error statement, for animals that state none.",
        _number(0.001, 1_000_000.0),
    ),
    Setting(
        "SOJOURN_TASK_DEADLINE_S",
        "task_deadline_s",
        "3600",
        "Longest time, in seconds, that one animal may take to compute.",
        _whole(1, 1_000_000),
    ),
)
