"""The real server, in its own process, on a loopback port of its own."""

import contextlib
import http.client
import json
import os
import signal
import socket
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

import pytest

from service.command_line import banner

PROJECT = Path(__file__).resolve().parents[2]


@dataclass(frozen=True)
class Answer:
    status: int
    headers: http.client.HTTPMessage
    body: bytes

    def json(self):
        return json.loads(self.body)

    def problem(self):
        """The body, which must be a problem document of this status."""
        assert self.headers["Content-Type"] == "application/problem+json"
        assert self.body.endswith(b"\n")
        document = self.json()
        assert document["status"] == self.status
        assert document["type"].startswith("/problems/")
        return document


class Server:
    """A running server: ask it, read its log, stop it."""

    def __init__(self, process, log):
        self._process = process
        self._log = log
        self.pid = process.pid
        listening = self._wait_for_line("listening")
        self.url = listening["address"]
        host, port = self.url.removeprefix("http://").split(":")
        self.address = (host, int(port))

    def request(self, method, path, body=None, headers=None):
        """One request on a connection of its own."""
        connection = http.client.HTTPConnection(*self.address, timeout=30)
        with contextlib.closing(connection):
            connection.request(method, path, body, headers or {})
            answer = connection.getresponse()
            return Answer(answer.status, answer.headers, answer.read())

    def get(self, path, **headers):
        return self.request("GET", path, headers=headers)

    def post(self, path, document, **headers):
        """POST ``document``: bytes as they are, anything else as JSON."""
        body = document if isinstance(document, bytes) else json.dumps(document).encode()
        return self.request("POST", path, body, {"Content-Type": "application/json", **headers})

    def connect(self):
        return socket.create_connection(self.address, timeout=30)

    def raw(self, data):
        """Send bytes that no HTTP client would, and parse what comes back."""
        with self.connect() as sock, http.client.HTTPResponse(sock) as answer:
            sock.sendall(data)
            answer.begin()
            return Answer(answer.status, answer.headers, answer.read())

    def log_lines(self):
        """Everything logged so far, each line parsed."""
        return [json.loads(line) for line in self._log.read_text().splitlines()]

    def logged(self, request_id):
        """The line of the request of that id; written just before its answer leaves."""
        (line,) = [line for line in self.log_lines() if line.get("request_id") == request_id]
        return line

    def signal(self, number):
        os.kill(self.pid, number)

    def exit_code(self, within=20):
        return self._process.wait(within)

    def _wait_for_line(self, event, within=30):
        deadline = time.monotonic() + within
        while time.monotonic() < deadline:
            # The last line may be half written.
            for line in self._log.read_bytes().splitlines(keepends=True):
                if line.endswith(b"\n") and (said := json.loads(line))["event"] == event:
                    return said
            if self._process.poll() is not None:
                break
            time.sleep(0.05)
        raise AssertionError(f"no {event!r} within {within} s:\n{self._log.read_text()}")


@contextlib.contextmanager
def running(*options, **environment):
    """A server with these options, stopped at the end if the test has not done so."""
    with tempfile.TemporaryDirectory() as directory:
        log = Path(directory, "log")
        with open(log, "wb") as stdout, open(Path(directory, "err"), "wb") as stderr:
            process = subprocess.Popen(
                [sys.executable, "-m", "service", "serve", "--port", "0", *options],
                cwd=PROJECT,
                env={k: v for k, v in os.environ.items() if not k.startswith("MOLWRIGHT_")}
                | environment,
                stdin=subprocess.DEVNULL,
                stdout=stdout,
                stderr=stderr,
            )
            try:
                server = Server(process, log)
                assert server.get("/readyz").status == 200
                yield server
                if process.poll() is None:
                    process.send_signal(signal.SIGTERM)
                said = Path(directory, "err").read_text
                assert process.wait(20) == 0, said()
                # Nothing but the requests to paste: what fails would stand here too.
                assert said() == f"{banner(server.url)}\n"
            finally:
                if process.poll() is None:
                    process.kill()
                    process.wait()


@pytest.fixture(scope="session")
def server():
    """One server with two workers for the whole session; tests must leave it as they found it."""
    with running("--workers", "2") as started:
        yield started


@pytest.fixture(scope="session")
def start_server():
    """``with start_server("--threads", "4") as server``: a server for one test."""
    return running
