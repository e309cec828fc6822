"""The log: one JSON object a line on standard output, and nothing else there.

Requests, the web server's own messages, warnings and failures take the same
way out. A line never holds a word of a request's body, path, query or header,
but for its X-Request-ID and its method.
"""

from __future__ import annotations

import logging
import os
import random
import re
import sysconfig
import time
import traceback
from collections.abc import Iterable, Iterator, MutableMapping
from datetime import UTC, datetime
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import flask
import orjson
import structlog

from service import __version__

if TYPE_CHECKING:
    from _typeshed.wsgi import StartResponse, WSGIApplication, WSGIEnvironment

REQUEST_ID = re.compile(r"[A-Za-z0-9._-]{1,64}")
"""What a caller may send as X-Request-ID; anything else is replaced."""

_STANDARD_OUTPUT = 1


class _Output:
    """Writes a line with one system call, so that lines of several processes stay whole.

    It writes to the descriptor, not to ``sys.stdout``: no buffer to flush, no
    lock to hold over a fork.
    """

    def _write(self, line: bytes) -> None:
        # An answer is worth more than its log line: a full disk or a reader
        # that went away must not turn a good answer into a failure.
        try:
            os.write(_STANDARD_OUTPUT, line)
        except OSError:
            return

    debug = info = warning = error = critical = _write


def _render(_logger: object, level: str, fields: MutableMapping[str, Any]) -> bytes:
    line = {"time": _now(), "level": level, "event": fields.pop("event"), **fields}
    return orjson.dumps(line, default=str, option=orjson.OPT_APPEND_NEWLINE)


def _now() -> str:
    now = time.time_ns() // 1_000_000
    return f"{_second(now // 1000)}.{now % 1000:03d}+00:00"


@lru_cache(maxsize=2)  # many lines share their second, and to write a date takes time
def _second(seconds: int) -> str:
    return datetime.fromtimestamp(seconds, UTC).strftime("%Y-%m-%dT%H:%M:%S")


def logger(level: int = logging.INFO) -> Any:
    """Return a logger whose lines of at least ``level`` reach standard output."""
    return structlog.wrap_logger(
        _Output(),
        processors=[_render],
        wrapper_class=structlog.make_filtering_bound_logger(level),
        cache_logger_on_first_use=True,
    ).bind()


_ROOTS = sorted(
    {
        str(Path(__file__).resolve().parents[1]),
        *(sysconfig.get_path(name) for name in ("purelib", "platlib", "stdlib")),
    },
    key=len,
    reverse=True,
)
"""Where packages stand: one may stand within another."""

_MOST_FRAMES = 40


def _failures(error: BaseException | None) -> Iterator[dict[str, Any]]:
    """Yield the class and the last frames of an exception, then of what it came from.

    Its message stays out: it may quote the request.
    """
    seen: set[int] = set()
    while error is not None and id(error) not in seen:
        seen.add(id(error))
        frames = [
            f"{_relative(frame.f_code.co_filename)}:{line} {frame.f_code.co_name}"
            for frame, line in traceback.walk_tb(error.__traceback__)
        ]
        kind = type(error)
        name = kind.__qualname__
        yield {
            "class": name if kind.__module__ == "builtins" else f"{kind.__module__}.{name}",
            "frames": frames[-_MOST_FRAMES:],
        }
        error = error.__cause__ or (None if error.__suppress_context__ else error.__context__)


def _relative(file: str) -> str:
    root = next((root for root in _ROOTS if file.startswith(root + os.sep)), None)
    return os.path.relpath(file, root) if root else os.path.basename(file)


class _Handler(logging.Handler):
    """Sends the records of the standard library's loggers the same way."""

    def __init__(self, level: int) -> None:
        super().__init__()
        self._logger = logger(level)

    def emit(self, record: logging.LogRecord) -> None:
        try:
            extra: dict[str, Any] = {}
            if flask.has_request_context():
                line = flask.request.environ.get(_LINE, {})
                extra["request_id"] = line.get("request_id")
            if record.exc_info and record.exc_info[1]:
                extra["exception"] = list(_failures(record.exc_info[1]))
            self._logger.log(
                record.levelno,
                record.getMessage(),
                logger=record.name,
                pid=record.process,
                **extra,
            )
        except Exception:
            self.handleError(record)


def configure(level: str) -> None:
    """Send everything this process logs to standard output, from ``level`` up."""
    threshold = logging.getLevelNamesMapping()[level.upper()]
    logging.basicConfig(level=threshold, handlers=[_Handler(threshold)], force=True)
    logging.captureWarnings(capture=True)


def new_request_id() -> str:
    """Return a name for a request that brought none; the workers' generators are seeded apart."""
    return f"{random.getrandbits(96):024x}"


_LINE = "molwright.log_line"
"""Where the WSGI environment holds the line in the making."""


def annotate(asked: flask.Request = flask.request, /, **fields: str) -> None:
    """Add ``fields`` to the log line of the request at hand: a digest, an error code."""
    asked.environ.setdefault(_LINE, {}).update(fields)


_output = _Output()


def write_request(began: int, line: dict[str, Any]) -> None:
    """Write the line of a request that was taken up at ``began``, ns of the performance counter."""
    line["milliseconds"] = round((time.perf_counter_ns() - began) / 1e6, 3)
    line["pid"] = os.getpid()
    line["release"] = __version__
    level = "error" if line["status"] == 500 else "info"
    # As the logger would: to go through it costs as much again, and there is no level to ask for.
    _output.info(_render(_output, level, {"event": "request", **line}))


class _RequestLog:
    """WSGI in, WSGI out, and a line about what went through.

    Hooks of the framework would cost twice as much and miss what fails outside them.
    """

    def __init__(self, application: WSGIApplication) -> None:
        self._application = application

    def __call__(self, environ: WSGIEnvironment, start_response: StartResponse) -> Iterable[bytes]:
        began = time.perf_counter_ns()
        request_id = environ.get("HTTP_X_REQUEST_ID", "")
        if not REQUEST_ID.fullmatch(request_id):
            request_id = new_request_id()
        line = environ[_LINE] = {
            "request_id": request_id,
            "method": environ["REQUEST_METHOD"],
            "route": None,
            "status": 500,
            "bytes": 0,
        }

        def start(status: str, headers: list[tuple[str, str]], *exc_info: Any) -> Any:
            # The framework leaves its request here until the answer is under way.
            request = environ.get("werkzeug.request")
            if request is not None and request.url_rule is not None:
                line["route"] = request.url_rule.rule
            line["status"] = int(status[:3])
            for name, value in headers:
                if name == "Content-Length":
                    line["bytes"] = int(value) if line["method"] != "HEAD" else 0
                    break
            headers.append(("X-Request-ID", request_id))
            return start_response(status, headers, *exc_info)

        try:
            return self._application(environ, start)
        finally:
            write_request(began, line)


def log_requests(app: flask.Flask) -> None:
    """Have ``app`` write one line for each request and give each an id.

    The id is the caller's X-Request-ID if :data:`REQUEST_ID` matches it, else
    a new one; the answer carries it back.
    """
    app.wsgi_app = _RequestLog(app.wsgi_app)  # type: ignore[method-assign]
