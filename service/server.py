"""The web server: the application in gunicorn, with the settings it is run with.

Threads wait for slow clients, processes compute: as many processes as cores,
one BLAS thread in each.
"""

from __future__ import annotations

import contextlib
import math
import os
import socket
import struct
import sys
from collections.abc import Callable
from dataclasses import dataclass
from http import HTTPStatus
from pathlib import Path
from typing import Any

import flask
from gunicorn import glogging, util
from gunicorn.app.base import BaseApplication
from gunicorn.http import errors, wsgi
from gunicorn.workers.gthread import ThreadWorker
from werkzeug.exceptions import ClientDisconnected

from service import logs
from service.problem_details import INTERNAL, PROBLEM_JSON, problem
from service.statuses import STATUSES

REQUEST_LINE = 4094  # bytes
HEADER_FIELDS = 50
HEADER_FIELD_SIZE = 8190  # bytes


@dataclass(frozen=True)
class Settings:
    """What an operator chooses; the rest stands in :func:`gunicorn_settings`."""

    host: str
    port: int
    workers: int
    threads: int
    log_level: str
    max_body: int  # bytes
    graceful_timeout: int  # s


def cores(quota: Path = Path("/sys/fs/cgroup/cpu.max")) -> int:
    """Return how many cores this process may use, the quota of a container included."""
    allowed = len(os.sched_getaffinity(0))
    try:
        limit, period = quota.read_text().split()
    except (OSError, ValueError):
        return allowed
    return allowed if limit == "max" else min(allowed, math.ceil(int(limit) / int(period)))


def gunicorn_settings(settings: Settings) -> dict[str, Any]:
    """Return the whole of the server's configuration: no file and no variable adds to it."""
    host = f"[{settings.host}]" if ":" in settings.host else settings.host
    memory = "/dev/shm"  # noqa: S108 - gunicorn makes an unlinked file of its own there
    return {
        "bind": f"{host}:{settings.port}",
        "workers": settings.workers,
        "threads": settings.threads,
        "worker_class": _Worker,
        "preload_app": True,  # the workers share what the imports filled
        "raw_env": ["OPENBLAS_NUM_THREADS=1", "OMP_NUM_THREADS=1"],
        "timeout": 30,
        "graceful_timeout": settings.graceful_timeout,
        "keepalive": 5,
        "max_requests": 5000,
        "max_requests_jitter": 500,
        "limit_request_line": REQUEST_LINE,
        "limit_request_fields": HEADER_FIELDS,
        "limit_request_field_size": HEADER_FIELD_SIZE,
        # The heartbeat must not wait for a slow or read-only disk.
        "worker_tmp_dir": memory if os.access(memory, os.W_OK) else None,
        # The socket would be made under $HOME, which a container may not have.
        "control_socket_disable": True,
        "proc_name": "molwright",
        "logger_class": _Logger,
        "loglevel": settings.log_level,
        "errorlog": None,  # _Logger hands everything on
    }


class Application(BaseApplication):  # type: ignore[misc]
    """The service as gunicorn runs it.

    Parameters
    ----------
    settings : Settings
    listening : callable
        Called with the address as soon as the server listens.
    """

    def __init__(self, settings: Settings, listening: Callable[[str], None]) -> None:
        self._settings = settings
        self._listening = listening
        super().__init__()

    def load_config(self) -> None:
        """Set the configuration; called again by SIGHUP."""
        for name, value in gunicorn_settings(self._settings).items():
            self.cfg.set(name, value)
        self.cfg.set("when_ready", self._ready)

    def load(self) -> flask.Flask:
        """Make the application, once, before the workers part."""
        # NumPy reads the thread settings when it is imported, so not before raw_env is in force.
        from service.app import create_app

        app = create_app(self._settings.max_body)
        # A body is read while a route runs; broken framing is the client's fault there too.
        app.register_error_handler(errors.ParseException, _refuse_body)
        app.register_error_handler(ClientDisconnected, _refuse_body)
        _warm_up(app)
        return app

    def _ready(self, arbiter: Any) -> None:
        host, port = arbiter.LISTENERS[0].getsockname()[:2]
        self._listening(f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}")


def _warm_up(app: flask.Flask) -> None:
    """Compute every packaged example once, before the workers part.

    What is imported or made on first use is then there, and shared: no request
    waits for it, and a release that cannot compute does not start.
    """
    from schemas.examples import EXAMPLES

    for example in EXAMPLES:
        path = f"/v1/{example.operation}"
        with app.test_request_context(path, method="POST", json=example.request):
            app.dispatch_request()


class _Logger(glogging.Logger):  # type: ignore[misc]
    """Hands the server's own messages on to the root logger."""

    def setup(self, cfg: Any) -> None:
        super().setup(cfg)
        self.error_log.propagate = True

    def exception(self, msg: str, *args: Any, **kwargs: Any) -> None:
        if isinstance(sys.exception(), BlockingIOError):  # see _SILENCE
            self.info("a client fell silent in the middle of a request")
        else:
            super().exception(msg, *args, **kwargs)


class _Response(wsgi.Response):  # type: ignore[misc]
    """An answer that does not say which server made it."""

    def default_headers(self) -> list[str]:
        return [line for line in super().default_headers() if not line.startswith("Server:")]


wsgi.Response = _Response  # gunicorn has no setting for it


_FAILED = ("internal-error", INTERNAL)
_FAULTS: dict[type[BaseException], tuple[str, str]] = {
    errors.LimitRequestLine: (
        "request-line-too-long",
        f"found a request line longer than {REQUEST_LINE} bytes, the most that is read; put what "
        "you ask into the body, not into the address",
    ),
    errors.LimitRequestHeaders: (
        "header-too-large",
        f"found more than {HEADER_FIELDS} header fields, or one longer than {HEADER_FIELD_SIZE} "
        "bytes; send fewer or shorter ones",
    ),
    errors.ExpectationFailed: (
        "expectation-failed",
        "found an Expect header other than 100-continue; leave it out",
    ),
    errors.UnsupportedTransferCoding: (
        "unsupported-transfer-coding",
        "found a transfer coding other than chunked; send the body chunked or with Content-Length",
    ),
    errors.ParseException: (
        "malformed-http",
        "found something other than a well-formed HTTP/1.1 request (RFC 9112): its request line, "
        "its header or the framing of its body; look at what the client, or a proxy on the way, "
        "sends. HTTPS sent to a plain HTTP port looks like this too",
    ),
    errors.ConfigurationProblem: _FAILED,
    errors.InvalidResponseHeader: _FAILED,
    errors.InvalidResponseHeaderName: _FAILED,
}
"""Code and detail for each exception; a class stands for its subclasses too."""
_FAULTS[ClientDisconnected] = _FAULTS[errors.ParseException]


def _fault(exc: BaseException) -> tuple[int, str, str]:
    known = (_FAULTS[kind] for kind in type(exc).__mro__ if kind in _FAULTS)
    code, detail = next(known, _FAILED)
    return STATUSES[code], code, detail


_SILENCE = struct.pack("ll", 30, 0)
"""How long a client may say or take nothing, as the kernel wants it: s, us."""


class _Worker(ThreadWorker):  # type: ignore[misc]
    """gunicorn's threaded worker, with its manners mended.

    * What it refuses before the application sees a request is a problem
      document like any other.
    * A client holds its own thread and nothing else: not the loop that serves
      all while its connection is closed, not for ever when it falls silent; and
      a worker without a free thread leaves new connections to the others.
    * On a stop it takes in the connections that wait in the queue and closes the
      queue at once: whoever comes later is refused, and may safely go elsewhere,
      where a reset would leave open what became of the request.
    """

    _requests = logs.logger()
    sockets: list[Any]

    def handle_error(self, req: Any, client: Any, addr: Any, exc: BaseException) -> None:  # noqa: ARG002
        status, code, detail = _fault(exc)
        if status == 500:
            self.log.error("request failed outside the application", exc_info=exc)
        request_id = logs.new_request_id()
        self._requests.info(
            "request", request_id=request_id, method=None, route=None, status=status, code=code
        )
        # Which path was meant is not known; "/" stands for the service.
        with self.wsgi.test_request_context():
            body = problem(status, code, detail).get_data()
        head = (
            f"HTTP/1.1 {status} {HTTPStatus(status).phrase}\r\n"
            "Connection: close\r\n"
            f"Content-Type: {PROBLEM_JSON}\r\n"
            f"Content-Length: {len(body)}\r\n"
            f"X-Request-ID: {request_id}\r\n\r\n"
        )
        with contextlib.suppress(OSError):  # the client may be gone
            util.write_nonblock(client, head.encode() + body)

    def handle(self, conn: Any) -> Any:
        conn.sock.setsockopt(socket.SOL_SOCKET, socket.SO_RCVTIMEO, _SILENCE)
        conn.sock.setsockopt(socket.SOL_SOCKET, socket.SO_SNDTIMEO, _SILENCE)
        again = super().handle(conn)
        if again is False:
            # gunicorn would wait in its loop, up to 2 s, for the client to close its side.
            conn.close(graceful=True)
            conn.close = _already_closed
        return again

    @property
    def worker_connections(self) -> int:
        """How many connections it may hold: one for each thread, beside those that wait."""
        waiting = len(self.keepalived_conns) + len(self.pending_conns)
        return int(min(self.cfg.worker_connections, self.cfg.threads + waiting))

    @worker_connections.setter
    def worker_connections(self, _configured: int) -> None:
        pass  # asked of the configuration, above

    def set_accept_enabled(self, enabled: bool) -> None:
        super().set_accept_enabled(enabled)
        if not enabled and not self.alive:
            for listener in self.sockets:
                waiting = True
                while waiting:
                    before = self.nr_conns
                    self.accept(listener)
                    waiting = self.nr_conns > before
                listener.close()
            self.sockets = []


def _already_closed(graceful: bool = False) -> None:
    pass


def _refuse_body(exc: BaseException) -> flask.Response:
    return problem(*_fault(exc))
