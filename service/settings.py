"""What an installation can set: one frozen value, read from the environment once.

Only the command line and ``service.app`` read it; everything else is handed the values it needs.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields
from datetime import timedelta
from difflib import get_close_matches
from ipaddress import ip_address
from pathlib import Path
from typing import Any, Self

PREFIX = "RIMEWARD_"
MEBIBYTE = 1024 * 1024


class SettingsError(ValueError):
    """A setting that the service cannot run with; its text is one sentence for the operator."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """What an installation can set; each field is read from ``RIMEWARD_`` and its name."""

    database_url: str = field(repr=False)
    """An SQLite file or a PostgreSQL database; by default a file in the state folder."""
    host: str = "127.0.0.1"
    port: int = 8420
    """Port 0 lets the system choose one."""
    admin_key: str | None = field(default=None, repr=False)
    """The first administrator's key, for unattended set-up."""
    demo: bool = True
    """Load the demo estate into a new database."""
    tls_cert: Path | None = None
    tls_key: Path | None = None
    behind_proxy: bool = False
    """A proxy in front ends TLS, and its forwarding headers are believed."""
    rooms_per_change: int = 200
    """A change that touches more rooms leaves them to the sweep."""
    sweep_batch: int = 50
    """Rooms recalculated in one transaction of the sweep."""
    memory_bytes: int = 64 * MEBIBYTE
    """Stored answers kept in memory for polls."""
    max_body_bytes: int = 1_000_000
    """The largest request body, imports aside."""
    sweep_every: timedelta = timedelta(seconds=1)
    clock_every: timedelta = timedelta(seconds=1)
    idempotency_for: timedelta = timedelta(hours=24)
    """How long a request can be repeated under its Idempotency-Key."""
    request_deadline: timedelta = timedelta(seconds=10)
    """How long a client may take to send headers and body."""
    log_level: str = "info"

    @classmethod
    def from_environment(cls, environ: Mapping[str, str]) -> Self:
        """Read the settings; a variable that is set to nothing counts as not set."""
        _refuse_unknown(environ)
        values: dict[str, Any] = {}
        for name, reader in _READERS.items():
            text = environ.get(_variable(name), "").strip()
            if text:
                values[name] = reader.value_of(_variable(name), text)
        if "database_url" not in values:
            file = state_folder(environ) / "rimeward.sqlite"
            values["database_url"] = f"sqlite:///{file.as_posix()}"
        return cls(**values)

    def check_address(self) -> None:
        """Refuse to serve other machines in the clear, and TLS files that are not there."""
        if (self.tls_cert is None) != (self.tls_key is None):
            raise SettingsError(
                "TLS needs both RIMEWARD_TLS_CERT and RIMEWARD_TLS_KEY; only one of them is set."
            )
        for name, path in (("TLS_CERT", self.tls_cert), ("TLS_KEY", self.tls_key)):
            if path is not None and not path.is_file():
                raise SettingsError(f"RIMEWARD_{name} names {path}, which is no file.")
        if self.tls_cert is None and not self.behind_proxy and not _is_loopback(self.host):
            raise SettingsError(
                f"RIMEWARD_HOST {self.host} can be reached from other machines, and keys would "
                "cross the network in the clear: set RIMEWARD_TLS_CERT and RIMEWARD_TLS_KEY, or "
                "RIMEWARD_BEHIND_PROXY=1 where a proxy ends TLS, or keep to 127.0.0.1."
            )


def state_folder(environ: Mapping[str, str]) -> Path:
    """Return the folder of this user where the service keeps what must outlive it."""
    # The XDG base directory specification wants a relative path ignored.
    given = Path(environ.get("XDG_STATE_HOME", ""))
    home = Path(environ["HOME"]) if environ.get("HOME") else Path.home()
    return (given if given.is_absolute() else home / ".local" / "state") / "rimeward"


@dataclass(frozen=True, slots=True)
class _Reader:
    """How the text of one variable becomes a value, and the words for what is allowed."""

    read: Callable[[str], Any]
    allowed: str
    secret: bool = False

    def value_of(self, variable: str, text: str) -> Any:
        """Read a text, or say which variable is bad and what it may hold."""
        try:
            return self.read(text)
        except (ValueError, OverflowError):
            shown = "" if self.secret else f", not {text!r}"
            raise SettingsError(f"{variable} must be {self.allowed}{shown}.") from None


def _matching(pattern: str) -> Callable[[str], str]:
    compiled = re.compile(pattern)

    def read(text: str) -> str:
        if compiled.fullmatch(text) is None:
            raise ValueError(text)
        return text

    return read


def _whole_number(least: int, most: int) -> _Reader:
    def read(text: str) -> int:
        if not re.fullmatch(r"[0-9]{1,18}", text) or not least <= int(text) <= most:
            raise ValueError(text)
        return int(text)

    return _Reader(read, f"a whole number from {least} to {most}")


def _duration(most: timedelta) -> _Reader:
    units = {"ms": 0.001, "s": 1, "": 1, "m": 60, "h": 3600, "d": 86400}

    def read(text: str) -> timedelta:
        match = re.fullmatch(r"([0-9]{1,9}(?:\.[0-9]{1,6})?) ?(ms|s|m|h|d|)", text)
        if match is None:
            raise ValueError(text)
        duration = timedelta(seconds=float(match[1]) * units[match[2]])
        if not timedelta(milliseconds=1) <= duration <= most:
            raise ValueError(text)
        return duration

    limit = f"{most.days} d" if most.days else f"{most.seconds} s"
    return _Reader(read, f"a duration from 1 ms to {limit}, such as 500ms, 30s, 5m, 24h or 7d")


def _yes_or_no(text: str) -> bool:
    word = text.lower()
    if word in ("1", "true", "yes", "on"):
        return True
    if word in ("0", "false", "no", "off"):
        return False
    raise ValueError(text)


def _log_level(text: str) -> str:
    return _matching("debug|info|warning|error|critical")(text.lower())


_SWITCH = _Reader(_yes_or_no, "1 or 0 (also true, false, yes, no, on, off)")
_FILE = _Reader(lambda text: Path(text).expanduser(), "the path of a PEM file")

_READERS: Mapping[str, _Reader] = {
    "database_url": _Reader(
        _matching(r"(?:sqlite(?:\+pysqlite)?:///|postgresql(?:\+psycopg)?://)\S.*"),
        "sqlite:/// and the path of a file, or postgresql:// and a server and database",
        secret=True,
    ),
    "host": _Reader(_matching(r"[0-9A-Za-z.:_-]+(?:%[0-9A-Za-z]+)?"), "a host name or address"),
    "port": _whole_number(0, 65535),
    "admin_key": _Reader(
        _matching("rw_[0-9A-Za-z_-]{8}_[0-9A-Za-z_-]{43}"),
        "rw_, 8 characters, _ and 43 characters, each a letter, digit, - or _",
        secret=True,
    ),
    "demo": _SWITCH,
    "tls_cert": _FILE,
    "tls_key": _FILE,
    "behind_proxy": _SWITCH,
    "rooms_per_change": _whole_number(1, 100_000),
    "sweep_batch": _whole_number(1, 10_000),
    "memory_bytes": _whole_number(MEBIBYTE, 64 * 1024 * MEBIBYTE),
    "max_body_bytes": _whole_number(10_000, 100_000_000),
    "sweep_every": _duration(timedelta(hours=1)),
    "clock_every": _duration(timedelta(minutes=1)),
    "idempotency_for": _duration(timedelta(days=30)),
    "request_deadline": _duration(timedelta(minutes=10)),
    "log_level": _Reader(_log_level, "debug, info, warning, error or critical"),
}


def variables() -> tuple[str, ...]:
    """Name every variable that the service reads, in the order of the settings."""
    return tuple(_variable(each.name) for each in fields(Settings))


def _variable(name: str) -> str:
    return PREFIX + name.upper()


def _refuse_unknown(environ: Mapping[str, str]) -> None:
    known = variables()
    for name in sorted(environ):
        if not name.startswith(PREFIX) or name in known:
            continue
        if re.search(r"_SERVICE_(HOST|PORT)|_PORT_[0-9]+_", name):
            raise SettingsError(
                f"{name} comes from Kubernetes, which names such variables after a service: "
                "set enableServiceLinks to false in the pod, or rename the service."
            )
        nearest = get_close_matches(name, known, n=1, cutoff=0.0)[0]
        raise SettingsError(f"{name} is no setting; the nearest known is {nearest}.")


def _is_loopback(host: str) -> bool:
    if host.lower() == "localhost":
        return True
    try:
        return ip_address(host).is_loopback
    except ValueError:
        return False
