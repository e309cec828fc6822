"""What an operator chooses: by flag, by variable of the environment, or in one TOML file.

A flag wins over a variable, a variable over the file, the file over the default. Everything is
read before anything is refused, so that every fault is named at once.
"""

from __future__ import annotations

import ipaddress
import math
import os
import re
import tomllib
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

PREFIX = "MOLWRIGHT_"
FILE = "configuration"
"""The flag that names the file: the only one that the file cannot hold."""


class Faults(Exception):  # noqa: N818 - it is a list of them
    """Everything that is wrong with a configuration, a sentence each."""

    def __init__(self, faults: Iterable[str]) -> None:
        self.faults = tuple(faults)
        super().__init__("; ".join(self.faults))


def cores(quota: Path = Path("/sys/fs/cgroup/cpu.max")) -> int:
    """Return how many cores this process may use, the quota of a container included."""
    allowed = len(os.sched_getaffinity(0))
    try:
        limit, period = quota.read_text().split()
    except (OSError, ValueError):
        return allowed
    return allowed if limit == "max" else min(allowed, math.ceil(int(limit) / int(period)))


@dataclass(frozen=True)
class Kind:
    """What a setting may be: how it is read from text and from TOML, and what is said of it.

    ``of_text`` and ``of_toml`` return the value, and raise ValueError for what is none.
    """

    needed: str
    of_text: Callable[[str], Any]
    of_toml: Callable[[Any], Any]
    metavar: str = "TEXT"
    switch: bool = False


def whole(least: int, most: int | None = None, metavar: str = "NUMBER") -> Kind:
    """Return the kind of a whole number within bounds."""
    needed = (
        f"a whole number from {least} to {most}"
        if most is not None
        else (f"a whole number of at least {least}")
    )

    def bounded(value: int) -> int:
        if value < least or (most is not None and value > most):
            raise ValueError
        return value

    def of_text(text: str) -> int:
        if not re.fullmatch(r"-?[0-9]{1,18}", text):
            raise ValueError
        return bounded(int(text))

    def of_toml(value: Any) -> int:
        if type(value) is not int:
            raise ValueError
        return bounded(value)

    return Kind(needed, of_text, of_toml, metavar)


def seconds(least: float) -> Kind:
    """Return the kind of a duration."""

    def bounded(value: float) -> float:
        if not (math.isfinite(value) and value >= least):
            raise ValueError
        return value

    def of_toml(value: Any) -> float:
        if type(value) not in (int, float):
            raise ValueError
        return bounded(float(value))

    needed = f"a number of seconds of at least {least:g}"
    return Kind(needed, lambda text: bounded(float(text)), of_toml, "SECONDS")


def choice(*choices: str) -> Kind:
    """Return the kind of a word out of a list, in small letters or capitals."""

    def read(value: Any) -> str:
        if not isinstance(value, str) or value.lower() not in choices:
            raise ValueError
        return value.lower()

    return Kind(f"one of {', '.join(choices)}", read, read, f"[{'|'.join(choices)}]")


_WORDS = {"true": True, "1": True, "yes": True, "false": False, "0": False, "no": False}


def _switch_of_toml(value: Any) -> bool:
    if type(value) is not bool:
        raise ValueError
    return value


def _switch_of_text(text: str) -> bool:
    if text.lower() not in _WORDS:
        raise ValueError
    return _WORDS[text.lower()]


SWITCH = Kind("true or false", _switch_of_text, _switch_of_toml, "", switch=True)


def _text(value: Any) -> str:
    if not isinstance(value, str):
        raise ValueError
    return value


TEXT = Kind("a text", _text, _text)


def _is_file(value: Any) -> Path:
    path = Path(_text(value)).absolute()
    if not (path.is_file() and os.access(path, os.R_OK)):
        raise ValueError
    return path


def _is_directory(value: Any) -> Path:
    path = Path(_text(value)).absolute()
    if not (path.is_dir() and os.access(path, os.R_OK | os.X_OK)):
        raise ValueError
    return path


READABLE = Kind("a file that this user may read", _is_file, _is_file, "FILE")
DIRECTORY = Kind("a directory that this user may read", _is_directory, _is_directory, "DIR")


def _networks(words: Iterable[Any]) -> tuple[str, ...]:
    return tuple(str(ipaddress.ip_network(_text(word).strip())) for word in words)


def _networks_of_toml(value: Any) -> tuple[str, ...]:
    if not isinstance(value, list):
        raise ValueError
    return _networks(value)


NETWORKS = Kind(
    "addresses or networks (10.0.0.0/8), with commas between them; a list of them in the file",
    lambda text: _networks(text.split(",")) if text.strip() else (),
    _networks_of_toml,
    "ADDRESSES",
)


def setting(
    kind: Kind, says: str, default: Any = ..., *, shown: str | None = None, make: Any = None
) -> Any:
    """Return the field of a setting: its kind, its line in ``--help``, and its default."""
    about = {"kind": kind, "says": says, "shown": shown}
    if make is not None:
        return field(default_factory=make, metadata=about)
    return field(default=default, metadata=about)


@dataclass(frozen=True, kw_only=True)
class Settings:
    """What an operator chooses; the rest of the server stands in ``service.server``."""

    host: str = setting(TEXT, "Address to listen on; 0.0.0.0 for every one.", "127.0.0.1")
    port: int = setting(whole(0, 65535), "0 takes a free one.", 8410)
    workers: int = setting(
        whole(1, 1000), "Processes that compute.", make=cores, shown="the cores at hand"
    )
    threads: int = setting(
        whole(1, 1000),
        "Requests that a process holds at once; 32 where no buffering proxy stands in front.",
        16,
    )
    log_level: str = setting(
        choice("debug", "info", "warning", "error", "critical"),
        "Least severe messages to log; the line for each request is always written.",
        "info",
    )
    max_body: int = setting(whole(1, metavar="BYTES"), "Largest request body taken.", 16 * 2**20)
    graceful_timeout: int = setting(
        whole(1, metavar="SECONDS"), "How long a stop waits for requests under way.", 30
    )
    data_sheets: Path | None = setting(  # noqa: RUF009 - it makes a field
        DIRECTORY, "Directory of the data sheets that are served by their tags.", None
    )


@dataclass(frozen=True)
class Described:
    """A setting as it is named: ``max-body`` on the command line and in the file."""

    name: str
    kind: Kind
    says: str
    default: str

    @property
    def variable(self) -> str:
        """The variable of the environment."""
        return PREFIX + self.name.replace("-", "_").upper()

    @property
    def attribute(self) -> str:
        """Its name in :class:`Settings`."""
        return self.name.replace("-", "_")

    @property
    def help(self) -> str:
        """Its line in ``--help``."""
        default = f"; default: {self.default}" if self.default else ""
        return f"{self.says}  [env var: {self.variable}{default}]"


def _described(of: Any) -> Described:
    shown = of.metadata["shown"] or written(of.default)
    return Described(of.name.replace("_", "-"), of.metadata["kind"], of.metadata["says"], shown)


def written(value: Any) -> str:
    """Return a value as the command line would take it; empty for none."""
    if value is None or value is False:
        return ""
    if value is True:
        return "true"
    if isinstance(value, tuple):
        return ",".join(value)
    return f"{value:g}" if isinstance(value, float) else str(value)


DESCRIBED = tuple(_described(of) for of in fields(Settings))
"""Every setting, in the order of ``--help``."""

_BY_NAME = {of.name: of for of in DESCRIBED}


@dataclass(frozen=True)
class Configuration:
    """The settings in force, and where each comes from.

    Attributes
    ----------
    settings : Settings
    sources : Mapping[str, str]
        By name: ``--port``, ``MOLWRIGHT_PORT``, the file, or ``default``.
    unknown : tuple of str
        Variables of the service's own prefix that no setting reads.
    """

    settings: Settings
    sources: Mapping[str, str]
    unknown: tuple[str, ...] = ()


def load(
    flags: Mapping[str, str], environment: Mapping[str, str], file: str | None = None
) -> Configuration:
    """Read every source and return what is in force.

    Parameters
    ----------
    flags : Mapping[str, str]
        What was said on the command line, by the setting's name.
    environment : Mapping[str, str]
        Variables, of which those with the service's prefix are read.
    file : str, optional
        The TOML file; else the one that the environment names.

    Raises
    ------
    Faults
        With every fault of every source, those included that another source overrules.
    """
    faults: list[str] = []
    values: dict[str, Any] = {}
    sources: dict[str, str] = {}

    def take(of: Described, read: Callable[[Any], Any], value: Any, source: str) -> None:
        try:
            values[of.attribute] = read(value)
        except (ValueError, OverflowError):
            faults.append(_fault(of, value, source))
        sources[of.name] = source

    named = f"--{FILE}" if file is not None else PREFIX + FILE.upper()
    path = file if file is not None else environment.get(named)
    for name, value in _of_file(path, named, faults).items():
        of = _BY_NAME.get(name)
        if of is None:
            faults.append(f"{path}: no setting is called {name!r}; {_nearest(name)}")
        else:
            take(of, of.kind.of_toml, value, f"{path}: {name}")
    unknown = []
    for variable, text in sorted(environment.items()):
        if variable.startswith(PREFIX) and variable != PREFIX + FILE.upper():
            of = next((of for of in DESCRIBED if of.variable == variable), None)
            if of is None:
                unknown.append(variable)
            else:
                take(of, of.kind.of_text, text, variable)
    for name, text in flags.items():
        take(_BY_NAME[name], _BY_NAME[name].kind.of_text, text, f"--{name}")
    settings = Settings(**values)
    faults += _contradictions(settings)
    if faults:
        raise Faults(faults)
    return Configuration(
        settings,
        {of.name: sources.get(of.name, "default") for of in DESCRIBED},
        tuple(unknown),
    )


def _fault(of: Described, value: Any, source: str) -> str:
    found = repr(value)
    said = f"{source}: found {found[:80]}; {of.kind.needed} is needed"
    if isinstance(value, str) and re.match(r"[a-z]+://", value):
        # Where the service is called so, the cluster puts addresses into the very variables.
        said += ". This looks like a service link of a cluster: set enableServiceLinks: false"
    return said


def _of_file(path: str | None, named: str, faults: list[str]) -> dict[str, Any]:
    if path is None:
        return {}
    try:
        return tomllib.loads(Path(path).read_text(encoding="utf-8"))
    except OSError as error:
        faults.append(f"{named}: the file {path!r} cannot be read ({error.strerror})")
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        faults.append(f"{path}: not TOML: {error}")
    return {}


def _nearest(name: str) -> str:
    import difflib

    near = difflib.get_close_matches(name.replace("_", "-"), _BY_NAME, n=1)
    return f"did you mean {near[0]!r}?" if near else "'molwright config' lists them all"


def _contradictions(_settings: Settings) -> list[str]:
    """Return what is wrong with settings that are right one by one."""
    return []


def told(configuration: Configuration) -> str:
    """Return what is in force as a TOML file that says the same, each with its source."""
    lines = []
    for of in DESCRIBED:
        value = getattr(configuration.settings, of.attribute)
        source = configuration.sources[of.name]
        if value is None:
            lines.append((f"# {of.name} is not set", ""))
        else:
            lines.append((f"{of.name} = {_toml(value)}", f"  # {source}"))
    width = max(len(text) for text, source in lines if source)
    text = "".join(f"{text:<{width if source else 0}}{source}\n" for text, source in lines)
    ignored = "".join(
        f"# {name} is not heeded: no setting reads it\n" for name in configuration.unknown
    )
    return text + ignored


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, tuple):
        return f"[{', '.join(_toml(item) for item in value)}]"
    if isinstance(value, int | float):
        return f"{value:g}" if isinstance(value, float) else str(value)
    # A TOML basic string escapes as JSON does.
    import json

    return json.dumps(str(value), ensure_ascii=False)
