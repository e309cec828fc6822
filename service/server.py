"""The web server: the application in gunicorn, with the settings it is run with.

Threads wait for slow clients, processes compute: as many processes as cores,
one BLAS thread in each.
"""

from __future__ import annotations

import contextlib
import errno
import logging
import os
import socket
import struct
import sys
import threading
import time
from collections.abc import Callable
from http import HTTPStatus
from typing import Any

import flask
from gunicorn import glogging, util
from gunicorn.app.base import BaseApplication
from gunicorn.http import errors, wsgi
from gunicorn.http.body import ChunkedReader, LengthReader
from gunicorn.workers.gthread import ThreadWorker

from service import logs
from service.configuration import Settings
from service.problem_details import INTERNAL, MALFORMED, problem
from service.statuses import STATUSES

REQUEST_LINE = 4094  # bytes
HEADER_FIELDS = 50
HEADER_FIELD_SIZE = 8190  # bytes


def address_fault(host: str, port: int) -> str:
    """Return why the server could not listen there and how to mend it; nothing where it can."""
    if "GUNICORN_FD" in os.environ or "LISTEN_FDS" in os.environ:
        return ""  # it is handed a socket that listens already
    another_host = "choose another with --host or MOLWRIGHT_HOST"
    another_port = "choose another with --port or MOLWRIGHT_PORT"
    with socket.socket(socket.AF_INET6 if ":" in host else socket.AF_INET) as probe:
        probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            # Of an empty host the kernel would make every address there is.
            probe.bind((host or " ", port))
        except (OSError, UnicodeError) as error:
            match getattr(error, "errno", None):
                case errno.EADDRINUSE:
                    return f"port {port} is taken; {another_port}"
                case errno.EACCES:
                    return f"this user may not listen on port {port}; {another_port}"
                case _:
                    return f"host {host[:80]!r} is no address of this machine; {another_host}"
    return ""


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
        # Nothing is believed of what a request says about the way it came.
        "forwarded_allow_ips": "",
        "forwarder_headers": "",
        "proc_name": "molwright",
        "worker_exit": _leave,
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

        app = create_app()
        _warm_up(app)
        # A caller's bodies may be allowed less than an example takes.
        app.config["MAX_CONTENT_LENGTH"] = self._settings.max_body
        # A body is read while a route runs; broken framing is the client's fault there too.
        app.register_error_handler(errors.ParseException, _refuse_body)
        return app

    def _ready(self, arbiter: Any) -> None:
        host, port = arbiter.LISTENERS[0].getsockname()[:2]
        self._listening(f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}")


def _warm_up(app: flask.Flask) -> None:
    """Compute every packaged example that is answered once, before the workers part.

    What is imported or made on first use is then there, and shared: no request
    waits for it, and a release that cannot compute does not start.
    """
    from schemas.examples import EXAMPLES
    from service.app import MAX_BODY

    for example in EXAMPLES:
        if example.status != 200:
            continue  # shows a refusal
        path = f"/v1/{example.operation}"
        with app.test_request_context(path, method="POST", json=example.request) as context:
            # Examples are computed whatever the largest body is that callers may send.
            context.request.max_content_length = MAX_BODY
            app.dispatch_request()
    _warm_up_pages(app)


def _warm_up_pages(app: flask.Flask) -> None:
    """Make one page with a plot: what draws takes most of a second to load."""
    from schemas.examples import EXAMPLES

    example = next(e for e in EXAMPLES if e.status == 200 and "sweep" in e.request)
    path = f"/v1/{example.operation}"
    with app.test_request_context(
        path, method="POST", json=example.request, headers={"Accept": "text/html"}
    ):
        app.dispatch_request()


class _Logger(glogging.Logger):  # type: ignore[misc]
    """Hands the server's own messages on to the root logger."""

    def setup(self, cfg: Any) -> None:
        super().setup(cfg)
        self.error_log.propagate = True
        # Below that it tells paths, and what it read of a request that broke off.
        self.error_log.setLevel(max(self.loglevel, logging.INFO))

    def exception(self, msg: str, *args: Any, **kwargs: Any) -> None:
        if isinstance(sys.exception(), BlockingIOError):  # see _SILENCE
            self.info("a client fell silent in the middle of a request")
        else:
            super().exception(msg, *args, **kwargs)


class _Response(wsgi.Response):  # type: ignore[misc]
    """An answer that does not say which server made it, and says when it is the last."""

    def should_close(self) -> bool:
        # What was left unread of a body stands where the next request would begin.
        return _left_unread(self.req.body.reader) or bool(super().should_close())

    def default_headers(self) -> list[str]:
        return [line for line in super().default_headers() if not line.startswith("Server:")]


wsgi.Response = _Response  # gunicorn has no setting for it


def _left_unread(reader: Any) -> bool:
    if isinstance(reader, LengthReader):
        return bool(reader.length)
    return isinstance(reader, ChunkedReader) and reader.parser is not None


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
    errors.ParseException: ("malformed-http", MALFORMED),
    errors.ConfigurationProblem: _FAILED,
    errors.InvalidResponseHeader: _FAILED,
    errors.InvalidResponseHeaderName: _FAILED,
}
"""Code and detail for each exception; a class stands for its subclasses too."""


def _fault(exc: BaseException) -> tuple[int, str, str]:
    known = (_FAULTS[kind] for kind in type(exc).__mro__ if kind in _FAULTS)
    code, detail = next(known, _FAILED)
    return STATUSES[code], code, detail


_SILENCE = struct.pack("ll", 30, 0)
"""How long a client may say or take nothing, as the kernel wants it: s, us."""

_LINGER = 2.0  # s
_DRAINED = 64 * 2**20  # bytes
"""How long, and for how much, a client that is still sending is listened to after its answer.

Closed at once, its connection would be reset, and the answer lost on the way.
"""


class _Worker(ThreadWorker):  # type: ignore[misc]
    """gunicorn's threaded worker, with its manners mended.

    * What it refuses before the application sees a request is a problem
      document like any other.
    * A client holds its own thread and nothing else: not the loop that serves
      all while its connection is closed, not for ever when it falls silent; and
      a worker without a free thread leaves new connections to the others.
    * An interrupt drops whatever is under way, at once, wherever it strikes.
    * On a stop it takes in the connections that wait in the queue and closes the
      queue at once: whoever comes later is refused, and may safely go elsewhere,
      where a reset would leave open what became of the request.
    """

    sockets: list[Any]

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self._taken_up = threading.local()

    def handle_error(self, req: Any, client: Any, addr: Any, exc: BaseException) -> None:  # noqa: ARG002
        status, code, detail = _fault(exc)
        request_id = logs.new_request_id()
        if status == 500:
            self.log.error("request %s failed outside the application", request_id, exc_info=exc)
        # Which path was meant is not known; "/" stands for the service.
        with self.wsgi.test_request_context():
            response = self.wsgi.process_response(problem(status, code, detail))
        body = response.get_data()
        line = {"method": None, "route": None, "status": status, "bytes": len(body), "code": code}
        logs.write_request(self._taken_up.at, {"request_id": request_id, **line})
        response.headers["Connection"] = "close"
        response.headers["X-Request-ID"] = request_id
        head = f"HTTP/1.1 {status} {HTTPStatus(status).phrase}\r\n{response.headers}"
        with contextlib.suppress(OSError):  # the client may be gone
            util.write_nonblock(client, head.encode() + body)

    def handle(self, conn: Any) -> Any:
        self._taken_up.at = time.perf_counter_ns()
        conn.sock.setsockopt(socket.SOL_SOCKET, socket.SO_RCVTIMEO, _SILENCE)
        conn.sock.setsockopt(socket.SOL_SOCKET, socket.SO_SNDTIMEO, _SILENCE)
        again = super().handle(conn)
        if again is False:
            # gunicorn would wait for the client to close its side in the loop that serves all.
            conn.sock.setblocking(True)
            util.close_graceful(conn.sock, _LINGER, _DRAINED)
            conn.close = _already_closed
        return again

    def handle_quit(self, _signal: int, _frame: Any) -> None:
        # Not here: what the signal interrupted may hold a lock that a stop needs.
        self.method_queue.defer(self._quit)

    def _quit(self) -> None:
        self.alive = False
        sys.exit(0)

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


def _leave(_arbiter: Any, _worker: Any) -> None:
    """End this worker's process: Python itself would first wait for threads that wait."""
    reason = sys.exception()
    os._exit(reason.code if isinstance(reason, SystemExit) and isinstance(reason.code, int) else 1)


def _already_closed(graceful: bool = False) -> None:
    pass


def _refuse_body(exc: BaseException) -> flask.Response:
    return problem(*_fault(exc))
