import dataclasses
import errno
import os
import shutil
import socket
import subprocess
import sys

import pytest
from click.testing import CliRunner

from schemas import contract as published
from schemas import examples
from service import command_line, configuration, replay, server
from service.app import MAX_BODY


@pytest.fixture
def started(monkeypatch):
    """The settings that ``serve`` would start the server with."""
    seen = []

    class Stub:
        def __init__(self, settings, _listening):
            seen.append(settings)

        def run(self):
            pass

    monkeypatch.setattr(server, "Application", Stub)
    monkeypatch.setattr(command_line.logs, "configure", lambda _level: None)

    def start(*arguments, **env):
        result = CliRunner().invoke(command_line.main, ["serve", *arguments], env=env)
        assert result.exit_code == 0, result.output
        return seen.pop()

    return start


def test_what_it_starts_with_when_nothing_is_said(started):
    settings = started()
    assert (settings.host, settings.port) == ("127.0.0.1", 8410)
    assert (settings.workers, settings.threads) == (configuration.cores(), 16)
    assert settings.max_body == MAX_BODY


@pytest.mark.parametrize(
    ("quota", "expected"),
    [("max 100000", 8), ("150000 100000", 2), ("20000 100000", 1), ("1600000 100000", 8)],
)
def test_a_containers_quota_bounds_the_workers(tmp_path, monkeypatch, quota, expected):
    monkeypatch.setattr(os, "sched_getaffinity", lambda _pid: set(range(8)))
    file = tmp_path / "cpu.max"
    file.write_text(f"{quota}\n")
    assert configuration.cores(file) == expected
    assert configuration.cores(tmp_path / "missing") == 8


def test_numpy_finds_one_thread_whatever_the_environment_says():
    script = "import service.command_line, os, sys; assert 'numpy' not in sys.modules; " + (
        "print(os.environ['OPENBLAS_NUM_THREADS'], os.environ['OMP_NUM_THREADS'])"
    )
    done = subprocess.run(
        [sys.executable, "-c", script],
        env=os.environ | {"OPENBLAS_NUM_THREADS": "8"},
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.split() == ["1", "1"]


def test_the_contract_is_printed_and_checked(monkeypatch):
    run = CliRunner().invoke
    assert run(command_line.main, ["contract"]).output.encode() == published.published_text()
    assert run(command_line.main, ["contract", "--check"]).exit_code == 0

    stale = published.published_text().replace(b'"openapi": "3.1.0"', b'"openapi": "3.0.0"')
    monkeypatch.setattr(published, "published_text", lambda: stale)
    refused = run(command_line.main, ["contract", "--check"])
    assert refused.exit_code == 1
    assert '"openapi": "3.0.0"' in refused.output
    assert '"openapi": "3.1.0"' in refused.output


@pytest.fixture
def source_tree(tmp_path, monkeypatch):
    """A source tree of packaged files alone, for the command to write to."""
    place = tmp_path / "schemas/published"
    shutil.copytree(str(examples.PLACE), place / "examples")
    monkeypatch.setattr(examples, "PLACE", place / "examples")
    monkeypatch.setattr(published, "PUBLISHED", place / "openapi.json")
    (tmp_path / "pyproject.toml").touch()
    return place


def test_the_contract_is_written_with_its_answers(source_tree):
    answer = source_tree / "examples/high-temperature-shift.answer.json"
    right = answer.read_bytes()
    answer.write_bytes(b'{"stale": true}')
    done = CliRunner().invoke(command_line.main, ["contract", "--write"])
    assert (done.exit_code, done.output) == (0, "")
    assert answer.read_bytes() == right
    written = (source_tree / "openapi.json").read_bytes()
    assert written == published.render(published.openapi_document())
    assert b'"stale"' not in written


def test_a_contract_is_not_written_over_an_installed_one(source_tree):
    (source_tree.parents[1] / "pyproject.toml").unlink()
    done = CliRunner().invoke(command_line.main, ["contract", "--write"])
    assert done.exit_code == 1
    assert "in a source tree" in done.output
    assert not (source_tree / "openapi.json").exists()


@pytest.mark.usefixtures("source_tree")
def test_an_example_answered_otherwise_leaves_everything_as_it_was(monkeypatch):
    first, *others = examples.EXAMPLES
    wrong = dataclasses.replace(others[-1], status=418)
    monkeypatch.setattr(replay, "EXAMPLES", (first, wrong))
    first.answer_file.write_bytes(b"as it was")
    done = CliRunner().invoke(command_line.main, ["contract", "--write"])
    assert done.exit_code == 1
    assert f"Error: the example {wrong.name} " in done.output
    assert first.answer_file.read_bytes() == b"as it was"


def start_in_vain(*options):
    """Start the service where it cannot listen; return what it says before it gives up."""
    done = subprocess.run(
        [sys.executable, "-m", "service", "serve", *options],
        capture_output=True,
        text=True,
        check=False,
        timeout=4,  # the web server itself would try for 5 s
    )
    assert done.returncode == 1
    assert done.stdout == ""
    (line,) = done.stderr.splitlines()
    return line


@pytest.mark.parametrize("address", ["127.0.0.1", "::1"])
def test_a_port_that_is_taken_is_told_in_a_sentence(address):
    family = socket.AF_INET6 if ":" in address else socket.AF_INET
    with socket.create_server((address, 0), family=family) as taken:
        port = taken.getsockname()[1]
        line = start_in_vain("--host", address, "--port", str(port), "--log-level", "critical")
    assert line == (f"Error: port {port} is taken; choose another with --port or MOLWRIGHT_PORT")


@pytest.mark.parametrize("host", ["no.such.host.invalid", "192.0.2.1", "a..b", ""])
def test_a_host_that_is_none_is_told_in_a_sentence(host):
    line = start_in_vain("--host", host, "--port", "0")
    assert line == (
        f"Error: host {host!r} is no address of this machine; choose another with --host or"
        " MOLWRIGHT_HOST"
    )


def test_a_port_for_which_one_needs_privileges_is_told(monkeypatch):
    def refuse(_socket, _address):
        raise PermissionError(errno.EACCES, "Permission denied")

    class Refusing(socket.socket):
        bind = refuse

    monkeypatch.setattr(server.socket, "socket", Refusing)
    assert server.address_fault("127.0.0.1", 80).startswith("this user may not listen on port 80;")
