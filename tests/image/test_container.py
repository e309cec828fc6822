"""The image built and run for real, by buildah.

The base image is a stand-in: Debian's own Python 3.11 under the official image's name, made
once by debootstrap and kept in the user's cache. Real here are the steps, the layers, the
user, the paths, the command and the health check. Skipped where the tools are not installed.
"""

import json
import os
import shutil
import signal
import socket
import subprocess
import time
import urllib.request
from pathlib import Path

import pytest

PROJECT = Path(__file__).resolve().parents[2]
BASE = "docker.io/library/python:3.11-slim"
TAG = "molwright-test"
MISSING = [tool for tool in ("buildah", "debootstrap") if shutil.which(tool) is None]

pytestmark = [
    pytest.mark.image,
    pytest.mark.skipif(bool(MISSING), reason=f"not installed: {', '.join(MISSING)}"),
    pytest.mark.skipif(os.getuid() != 0, reason="debootstrap needs root"),
]


@pytest.fixture(scope="module")
def buildah(tmp_path_factory):
    """Call buildah with a storage of its own, which goes away with the tests."""
    storage = tmp_path_factory.mktemp("storage")
    env = os.environ | {"STORAGE_DRIVER": "vfs", "BUILDAH_ISOLATION": "chroot"}
    where = ["buildah", "--root", storage / "root", "--runroot", storage / "run"]

    def call(*words):
        done = subprocess.run(
            [*where, *words], env=env, cwd=PROJECT, capture_output=True, text=True, check=False
        )
        assert done.returncode == 0, f"buildah {words}\n{done.stdout}{done.stderr}"
        return done.stdout.strip()

    call.start = lambda *words, **how: subprocess.Popen(
        [*where, *words], env=env, cwd=PROJECT, **how
    )
    yield call
    call("rm", "--all")
    shutil.rmtree(storage)


def stand_in():
    """A directory with Debian's Python 3.11 in it, made if it is not there yet."""
    cache = Path(os.environ.get("XDG_CACHE_HOME", Path.home() / ".cache"))
    base = cache / "molwright-tests/debian-python-3.11"
    if not base.exists():
        unfinished = base.with_name("unfinished")
        shutil.rmtree(unfinished, ignore_errors=True)
        unfinished.parent.mkdir(parents=True, exist_ok=True)
        wanted = "--include=python3.11,python3-pip,ca-certificates"
        subprocess.run(
            ["debootstrap", "--variant=minbase", wanted, "bookworm", unfinished],
            check=True,
            stdout=subprocess.DEVNULL,
        )
        # The official image calls its interpreter python and its pip pip.
        (unfinished / "usr/local/bin/python").symlink_to("/usr/bin/python3.11")
        unfinished.rename(base)
    return base


@pytest.fixture(scope="module")
def image(buildah):
    """The image's configuration, once it is built."""
    container = buildah("from", "scratch")
    buildah("copy", container, stand_in(), "/")
    buildah("commit", "--rm", container, BASE)
    # How this machine reaches its package index, lent to the build.
    lent = [
        path for path in ("/etc/pip.conf", "/etc/xdg/pip", "/etc/ssl/certs") if Path(path).exists()
    ]
    buildah(
        "build",
        "--pull-never",
        "--format=docker",  # the other format drops the health check
        "--network=host",
        *(f"--volume={path}:{path}:ro" for path in lent),
        "--tag",
        TAG,
        ".",
    )
    return json.loads(buildah("inspect", TAG))["Docker"]["config"]


def test_the_image_serves_as_its_own_user_and_stops(buildah, image, tmp_path):
    assert image["User"] == "1000:1000"
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    assert "MOLWRIGHT_HOST=0.0.0.0" in image["Env"], "nobody outside would reach it"
    command = image["Cmd"]
    kind, *healthcheck = image["Healthcheck"]["Test"]
    assert kind == "CMD"

    container = buildah("from", "--pull-never", TAG)
    env = ["--env=MOLWRIGHT_HOST=127.0.0.1", f"--env=MOLWRIGHT_PORT={port}"]
    run = ["run", "--network=host", *env, container, "--"]
    log = tmp_path / "log"
    with open(log, "wb") as output:
        engine = buildah.start(*run, *command, stdout=output, stderr=subprocess.STDOUT)
    try:
        deadline = time.monotonic() + 30
        while b"listening" not in log.read_bytes():
            assert engine.poll() is None, log.read_text()
            assert time.monotonic() < deadline, log.read_text()
            time.sleep(0.1)
        buildah(*run, *healthcheck)
        with urllib.request.urlopen(f"http://127.0.0.1:{port}/readyz", timeout=10) as answer:
            assert answer.status == 200
        # An engine sends the signal to the container's first process; this one has no such
        # way, so the process is found by what it says of itself.
        first = json.loads(log.read_text().splitlines()[0])["pid"]
        owner = Path(f"/proc/{first}").stat().st_uid
        assert owner == 1000
        os.kill(first, signal.SIGTERM)
        assert engine.wait(20) == 0, log.read_text()
        assert "Permission denied" not in log.read_text()
    finally:
        if engine.poll() is None:
            engine.kill()
            engine.wait()
