"""The Dockerfile, checked without a container engine.

Its text is linted; and its steps are replayed: each stage gets a directory of its own that
stands for ``/``, RUN runs, COPY copies, and what comes out is started, asked for its health
and stopped, as an engine would. What this cannot show is the base image itself.
"""

import fnmatch
import json
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
import tomllib
from dataclasses import dataclass, field
from pathlib import Path

import pytest

PROJECT = Path(__file__).resolve().parents[2]
USER = 1000
SHELL = ["/bin/sh", "-c"]
MACHINE = ("/bin", "/dev", "/proc", "/usr/bin")
"""Directories that a step finds on this machine, not in the stage."""


@dataclass(frozen=True)
class Step:
    keyword: str
    flags: dict[str, str]
    value: str

    @property
    def words(self):
        """The value as an exec form (a JSON list), or split at blanks."""
        if self.value.startswith("["):
            return json.loads(self.value)
        return self.value.split()


def steps(dockerfile):
    """The instructions of a Dockerfile, comments dropped and continued lines joined."""
    lines = [line for line in dockerfile.splitlines() if not line.lstrip().startswith("#")]
    for line in re.sub(r"\\\n", " ", "\n".join(lines)).splitlines():
        if not line.strip():
            continue
        keyword, rest = line.strip().split(maxsplit=1)
        flags = {}
        while match := re.match(r"--([\w-]+)=(\S+)\s+", rest):
            flags[match[1]] = match[2]
            rest = rest[match.end() :]
        yield Step(keyword, flags, rest)


def context_files(project):
    """What an engine is sent: all of ``project`` but what .dockerignore leaves out."""
    rules = [
        line
        for line in (project / ".dockerignore").read_text().splitlines()
        if line and not line.startswith("#")
    ]

    def matches(path, rule):
        # A rule names a path or a directory above it; ** stands for any directories.
        parents = [path, *path.parents][:-1]
        names = {str(parent) for parent in parents}
        if rule.startswith("**/"):
            names |= {parent.name for parent in parents}
            rule = rule.removeprefix("**/")
        return any(fnmatch.fnmatchcase(name, rule) for name in names)

    def sent(path):
        kept = True
        for rule in rules:
            if matches(path, rule.removeprefix("!")):
                kept = rule.startswith("!")
        return kept

    for path in sorted(project.rglob("*")):
        relative = path.relative_to(project)
        if relative.parts[0] not in (".git", ".venv") and path.is_file() and sent(relative):
            yield relative


@dataclass
class Image:
    """What the last stage leaves: a root directory and how to start what is in it."""

    root: Path
    env: dict[str, str] = field(default_factory=dict)
    workdir: str = "/"
    user: str = "0"
    command: list[str] = field(default_factory=list)
    healthcheck: list[str] = field(default_factory=list)

    def here(self, text):
        """``text`` with each absolute path in it moved below the root directory."""

        def moved(match):
            path = match[0]
            return path if path.startswith(MACHINE) else f"{self.root}{path}"

        return re.sub(r"(?<![^\s=:\"'])/[^\s:;&|\"']*", moved, text)

    def path(self, name):
        """The place of ``name``, absolute in the image or relative to its working directory."""
        return self.root / os.path.join(self.workdir, name).lstrip("/")

    def files(self):
        """Every file outside /tmp."""
        return {path for path in self.root.rglob("*") if self.root / "tmp" not in path.parents}

    def start(self, words, **how):
        """Start a command of the image, as the user of the image where this user may."""
        if os.getuid() == 0:
            how |= {"user": USER, "group": USER, "extra_groups": []}
        return subprocess.Popen(
            words, env=self.env, cwd=self.path("."), stdin=subprocess.DEVNULL, **how
        )


class Replay:
    """Carries out a Dockerfile's steps below a temporary directory.

    The stage at work always has the same root directory, for an environment holds absolute
    paths; a finished one is moved aside, so that nothing is found there by accident.
    """

    def __init__(self, place, project, python):
        self.root = place / "root"
        self.aside = place / "stages"
        self.project = project
        self.python = python
        self.aside.mkdir()
        self.image = None
        self.name = None

    def run(self, dockerfile):
        for step in steps(dockerfile):
            getattr(self, f"do_{step.keyword.lower()}")(step)
        return self.image

    def do_from(self, step):
        if self.image is not None:
            self.root.rename(self.aside / (self.name or "unnamed"))
        base, *name = step.value.split(" AS ")
        assert base == "python:3.11-slim", "the replay stands in for this base image only"
        self.name = name[0] if name else None
        tools = self.root / "usr/local/bin"
        tools.mkdir(parents=True)
        (self.root / "tmp").mkdir()
        (self.root / "tmp").chmod(0o1777)
        for tool, command in {
            "python": self.python,
            "pip": f"{sys.executable} -m pip",
        }.items():
            (tools / tool).write_text(f'#!/bin/sh\nexec {command} "$@"\n')
            (tools / tool).chmod(0o755)
        self.image = Image(self.root, {"PATH": f"{tools}:/usr/bin:/bin"})

    def do_workdir(self, step):
        self.image.workdir = os.path.join(self.image.workdir, step.value)
        self.image.path(".").mkdir(parents=True, exist_ok=True)

    def do_env(self, step):
        for name, value in re.findall(r"(\w+)=(\S+)", step.value):
            # $NAME first: what is in force already was moved when it was set.
            moved = self.image.here(value)
            self.image.env[name] = re.sub(r"\$(\w+)", lambda m: self.image.env[m[1]], moved)

    def do_copy(self, step):
        *sources, target = step.words
        goal = self.image.path(target)
        if target.endswith("/"):
            goal.mkdir(parents=True, exist_ok=True)
        for source in sources:
            if "from" in step.flags:
                origin = self.aside / step.flags["from"]
                found = [
                    path.relative_to(origin)
                    for path in (origin / source.lstrip("/")).rglob("*")
                    if not path.is_dir() or path.is_symlink()
                ]
            else:
                origin = self.project
                found = [
                    path for path in context_files(self.project) if path.is_relative_to(source)
                ]
            assert found, f"COPY {source}: nothing of that name"
            for path in found:
                below = path.relative_to(source.lstrip("/"))
                to = goal / below if below.parts else goal / path.name if goal.is_dir() else goal
                to.parent.mkdir(parents=True, exist_ok=True)
                shutil.copy2(origin / path, to, follow_symlinks=False)

    def do_run(self, step):
        # pip finds its indexes as it always does on this machine.
        client = re.compile(r"PIP_.*|.*_PROXY|SSL_CERT_.*|REQUESTS_CA_BUNDLE|HOME", re.IGNORECASE)
        done = subprocess.run(
            [*SHELL, self.image.here(step.value)],
            env={k: v for k, v in os.environ.items() if client.fullmatch(k)} | self.image.env,
            cwd=self.image.path("."),
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            check=False,
            timeout=300,
        )
        assert done.returncode == 0, f"RUN {step.value}\n{done.stdout}{done.stderr}"

    def do_user(self, step):
        self.image.user = step.value

    def do_expose(self, step):
        assert step.value == self.image.env["MOLWRIGHT_PORT"]

    def do_healthcheck(self, step):
        assert step.value.startswith("CMD [")
        self.image.healthcheck = json.loads(step.value.removeprefix("CMD "))

    def do_cmd(self, step):
        assert step.value.startswith("["), "the shell form would keep SIGTERM from the server"
        self.image.command = step.words


@pytest.fixture
def place():
    # pytest's own directories are closed to other users; the image's user must get in.
    directory = Path(tempfile.mkdtemp(prefix="molwright-image-"))
    directory.chmod(0o755)
    yield directory
    shutil.rmtree(directory)


def reachable_python():
    """A Python 3.11 that the image's user may start."""
    user = {"user": USER, "group": USER, "extra_groups": []} if os.getuid() == 0 else {}
    for candidate in (sys._base_executable, shutil.which("python3.11"), "/usr/bin/python3.11"):
        if candidate is None:
            continue
        try:
            subprocess.run([candidate, "-c", ""], check=True, cwd="/", **user)
        except OSError:
            continue
        return candidate
    pytest.skip(f"no Python 3.11 on this machine that user {USER} may start")


def test_the_back_end_that_builds_is_locked_at_the_version_that_is_required():
    project = tomllib.loads((PROJECT / "pyproject.toml").read_text())
    locked = re.findall(r"^\S+==\S+", (PROJECT / ".ci/requirements-build.lock").read_text(), re.M)
    assert locked == project["build-system"]["requires"]


def test_hadolint_finds_nothing():
    done = subprocess.run(
        [Path(sys.executable).with_name("hadolint"), PROJECT / "Dockerfile"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr


def test_what_the_dockerfile_builds_starts_answers_and_stops(place):
    image = Replay(place, PROJECT, reachable_python()).run((PROJECT / "Dockerfile").read_text())
    assert image.user == f"{USER}:{USER}"
    assert image.env["OPENBLAS_NUM_THREADS"] == image.env["OMP_NUM_THREADS"] == "1"
    before = image.files()
    notices = {path.name for path in before if "licenses" in path.parts}
    assert {"LICENSE", *(path.name for path in PROJECT.rglob("core/**/*.NOTICE.txt"))} <= notices

    everywhere = "0.0.0.0"  # noqa: S104 - what a container has to listen on; here loopback will do
    assert image.env["MOLWRIGHT_HOST"] == everywhere, "nobody outside would reach it"
    image.env["MOLWRIGHT_HOST"] = "127.0.0.1"
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        image.env["MOLWRIGHT_PORT"] = str(free.getsockname()[1])
    with open(place / "log", "wb") as log:
        server = image.start(image.command, stdout=log, stderr=subprocess.STDOUT)
    try:
        deadline = time.monotonic() + 30
        healthy = False
        while not healthy and server.poll() is None and time.monotonic() < deadline:
            healthy = image.start(image.healthcheck, stderr=subprocess.DEVNULL).wait(10) == 0
        said = (place / "log").read_text()
        assert healthy, said
        server.send_signal(signal.SIGTERM)
        assert server.wait(20) == 0, said
    finally:
        if server.poll() is None:
            server.kill()
            server.wait()
    assert image.files() == before, "a read-only root would not have allowed that"


SMALL = """
FROM python:3.11-slim AS build
WORKDIR /build
COPY kept.txt ./
RUN cp kept.txt /opt.txt \\
    && test -f /opt.txt
FROM python:3.11-slim
COPY --from=build /build /final
ENV PATH=/final/bin:$PATH
RUN test -f /final/kept.txt && case "$PATH" in /final/bin:*) ;; *) exit 1 ;; esac
CMD ["true"]
"""


@pytest.fixture
def small_project(tmp_path):
    for name in ("kept.txt", "left-out.txt"):
        (tmp_path / name).write_text(name)
    (tmp_path / ".dockerignore").write_text("*\n!kept.txt\n")
    return tmp_path


def test_the_replay_carries_out_what_is_right(place, small_project):
    image = Replay(place, small_project, sys.executable).run(SMALL)
    assert (image.root / "final/kept.txt").read_text() == "kept.txt"
    assert image.command == ["true"]


@pytest.mark.parametrize(
    ("right", "wrong"),
    [
        ("COPY kept.txt", "COPY left-out.txt"),  # .dockerignore holds it back
        ("RUN cp kept.txt", "RUN cp missing.txt"),
        ("RUN test -f /final/kept.txt", "RUN test -f /build/kept.txt"),  # another stage's file
        ("--from=build /build", "--from=build /elsewhere"),
        ('CMD ["true"]', "CMD true"),
    ],
)
def test_the_replay_fails_on_what_is_wrong(place, small_project, right, wrong):
    assert right in SMALL
    with pytest.raises(AssertionError):
        Replay(place, small_project, sys.executable).run(SMALL.replace(right, wrong))
