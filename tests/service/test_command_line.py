import os
import subprocess
import sys

import click
import pytest
from click.testing import CliRunner

from schemas import contract as published
from service import command_line, server
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
    assert (settings.workers, settings.threads) == (server.cores(), 16)
    assert settings.max_body == MAX_BODY


@pytest.mark.parametrize(
    ("option", "text", "value"),
    [
        ("host", "0.0.0.0", "0.0.0.0"),  # noqa: S104
        ("port", "80", 80),
        ("workers", "3", 3),
        ("threads", "5", 5),
        ("log-level", "debug", "debug"),
        ("max-body", "1000", 1000),
        ("graceful-timeout", "7", 7),
    ],
)
def test_every_option_is_a_variable_too(started, option, text, value):
    name = option.replace("-", "_")
    variable = f"MOLWRIGHT_{name.upper()}"
    assert getattr(started(f"--{option}", text), name) == value
    assert getattr(started(**{variable: text}), name) == value
    shown = CliRunner().invoke(command_line.main, ["serve", "--help"]).output
    assert f"--{option}" in shown
    assert variable in shown


def test_no_option_is_left_out_of_the_list_above():
    (parameters,) = [
        mark.args[1]
        for mark in test_every_option_is_a_variable_too.pytestmark
        if mark.name == "parametrize"
    ]
    options = {
        parameter.name.replace("_", "-")
        for parameter in command_line.serve.params
        if isinstance(parameter, click.Option)
    }
    assert options == {option for option, *_ in parameters}


@pytest.mark.parametrize(
    ("quota", "expected"),
    [("max 100000", 8), ("150000 100000", 2), ("20000 100000", 1), ("1600000 100000", 8)],
)
def test_a_containers_quota_bounds_the_workers(tmp_path, monkeypatch, quota, expected):
    monkeypatch.setattr(os, "sched_getaffinity", lambda _pid: set(range(8)))
    file = tmp_path / "cpu.max"
    file.write_text(f"{quota}\n")
    assert server.cores(file) == expected
    assert server.cores(tmp_path / "missing") == 8


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


def test_the_contract_is_printed_checked_and_written(tmp_path, monkeypatch):
    run = CliRunner().invoke
    assert run(command_line.main, ["contract"]).output.encode() == published.published_text()
    assert run(command_line.main, ["contract", "--check"]).exit_code == 0

    stale = published.published_text().replace(b'"openapi": "3.1.0"', b'"openapi": "3.0.0"')
    monkeypatch.setattr(published, "published_text", lambda: stale)
    refused = run(command_line.main, ["contract", "--check"])
    assert refused.exit_code == 1
    assert '"openapi": "3.0.0"' in refused.output
    assert '"openapi": "3.1.0"' in refused.output

    monkeypatch.setattr(published, "PUBLISHED", tmp_path / "openapi.json")
    assert run(command_line.main, ["contract", "--write"]).exit_code == 0
    written = (tmp_path / "openapi.json").read_bytes()
    assert written == published.render(published.openapi_document())
