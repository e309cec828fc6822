"""What the locks say of the dependencies, held against what their packages say of themselves.

Everything here works without a network: the locks and ``pyproject.toml`` are read, and the
metadata of the packages as they are installed. What it cannot know stands in DEVELOPERS.md.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import Any

from license_expression import ExpressionError, Licensing, get_spdx_licensing
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

PROJECT = Path(__file__).resolve().parents[2]
RUNTIME, DEVELOPMENT = PROJECT / "requirements.lock", PROJECT / "requirements-dev.lock"
BUILD = PROJECT / ".ci/requirements-build.lock"

ALLOWED = frozenset(
    {
        "0BSD",
        "Apache-2.0",
        "BSD-2-Clause",
        "BSD-3-Clause",
        "CC0-1.0",
        "MIT",
        "MIT-0",
        "MIT-CMU",
        "MPL-2.0",  # of single files, which the service uses as they are
        "PSF-2.0",
        "Zlib",
    }
)
"""SPDX identifiers under which a dependency may come with the service."""

ALLOWED_EXTRAS = ALLOWED | {
    "LGPL-3.0-or-later"  # asyncua, which only those have who ask for the extra, and may replace
}
"""The same of what the optional extras bring."""

_AS_NAMED = {
    "Apache 2.0": "Apache-2.0",
    "Apache Software License": "Apache-2.0",
    "GNU Lesser General Public License v3 or later (LGPLv3+)": "LGPL-3.0-or-later",
    "MIT License": "MIT",
    "Mozilla Public License 2.0 (MPL 2.0)": "MPL-2.0",
    "3-Clause BSD License": "BSD-3-Clause",
    "Python Software Foundation License": "PSF-2.0",
}
"""SPDX identifiers of what packages call their licences."""

_READ = dict.fromkeys(
    (
        "contourpy",
        "cycler",
        "flexcache",
        "flexparser",
        "itsdangerous",
        "jinja2",
        "kiwisolver",
        "pint",
        "scipy",
    ),
    "BSD-3-Clause",
)
"""Of packages that say "BSD" and not which: what the licence text that they come with is."""


@dataclass(frozen=True)
class Pin:
    """One package of a lock."""

    name: str
    version: str
    hashes: tuple[str, ...]


def read_lock(path: Path) -> dict[str, Pin]:
    """Return the packages that a lock pins, by canonical name."""
    pins = {}
    for line in re.sub(r"\\\n", " ", path.read_text()).splitlines():
        said = line.partition("#")[0].split()
        if not said:
            continue
        name, _, version = said[0].partition("==")
        hashes = tuple(word.removeprefix("--hash=") for word in said[1:])
        pins[canonicalize_name(name)] = Pin(name, version, hashes)
    return pins


@cache
def project() -> dict[str, Any]:
    """Return the ``[project]`` table of ``pyproject.toml``."""
    return dict(tomllib.loads((PROJECT / "pyproject.toml").read_text())["project"])


def stated(*extras: str) -> list[Requirement]:
    """Return what the project asks for, with what some of its extras ask for."""
    optional = project()["optional-dependencies"]
    lines = project()["dependencies"] + [line for extra in extras for line in optional[extra]]
    return [Requirement(line) for line in lines]


def requirements(name: str, extras: Iterable[str] = ()) -> list[Requirement]:
    """Return what an installed package asks for, on this machine and with these extras."""
    asked = [Requirement(line) for line in metadata.requires(name) or ()]
    within = [{"extra": extra} for extra in ("", *extras)]
    return [
        each
        for each in asked
        if each.marker is None or any(each.marker.evaluate(one) for one in within)
    ]


def closure(wanted: Iterable[Requirement]) -> dict[str, list[Requirement]]:
    """Return all that these requirements bring, by name, with every requirement made of each."""
    found: dict[str, list[Requirement]] = {}
    done, left = set(), list(wanted)
    while left:
        each = left.pop()
        name = canonicalize_name(each.name)
        found.setdefault(name, []).append(each)
        for extra in ("", *each.extras):
            if (name, extra) not in done:
                done.add((name, extra))
                left += requirements(name, [extra] if extra else [])
    return found


@cache
def spdx() -> Licensing:
    """Return what knows the identifiers of SPDX; it takes a while to make."""
    return get_spdx_licensing()


def licence(name: str) -> str:
    """Return the SPDX expression of an installed package's licence, or what stands for one.

    Raises
    ------
    LookupError
        The package does not say it in a way that is known here.
    """
    said = metadata.metadata(name)
    classifiers = [
        line.rpartition("::")[2].strip()
        for line in said.get_all("Classifier") or ()
        if line.startswith("License")
    ]
    short = (said.get("License") or "").strip()
    for words in (said.get("License-Expression"), short, *classifiers):
        words = _AS_NAMED.get(words or "", words or "")
        if words and "\n" not in words:
            try:
                return str(spdx().parse(words, validate=True))
            except ExpressionError:
                continue
    if "BSD License" in classifiers and name in _READ:
        return _READ[name]
    raise LookupError(f"{name}: licence {short[:60]!r}, {classifiers}; read its text, and name it")


def refused(expression: str, allowed: frozenset[str]) -> set[str]:
    """Return the identifiers of an expression without which it cannot be fulfilled."""
    parsed = spdx().parse(expression)

    def lacking(node: Any) -> set[str]:
        if not node.args:
            return {str(node)} - allowed
        parts = [lacking(part) for part in node.args]
        if "OR" in type(node).__name__:
            return set() if not all(parts) else set.union(*parts)
        return set.union(*parts)

    return lacking(parsed)
