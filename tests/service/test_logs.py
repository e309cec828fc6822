import json
import logging
import os
import re
import warnings

import flask
import pytest

from service import __version__, logs
from service.app import create_app


class StrangeError(Exception):
    pass


@pytest.fixture
def app():
    made = flask.Flask("logged")

    @made.get("/things/<name>")
    def thing(name):
        logs.annotate(digest="sha256:0")
        return name

    @made.get("/fails")
    def fails():
        try:
            int("secret of a request")
        except ValueError as error:
            raise StrangeError("a secret too") from error

    @made.get("/warns")
    def warns():
        logging.getLogger("somewhere").warning("take %s", "care")
        return ""

    logs.log_requests(made)
    return made


@pytest.fixture
def lines(capfd):
    """Return what was logged since the last call, parsed."""

    def read():
        return [json.loads(line) for line in capfd.readouterr().out.splitlines()]

    return read


@pytest.fixture
def configured():
    """Log as a server process does, for one test."""
    root = logging.getLogger()
    before = root.handlers[:], root.level
    logs.configure("warning")
    yield
    logging.captureWarnings(capture=False)
    root.handlers, root.level = before


def test_a_request_is_one_line_with_its_rule_and_what_was_added(app, lines):
    app.test_client().get("/things/secret?query=secret", headers={"X-Request-ID": "r.1"})
    (line,) = lines()
    assert "secret" not in str(line)
    assert line.pop("time")
    assert line.pop("milliseconds") > 0
    assert line.pop("pid") == os.getpid()
    assert line == {
        "level": "info",
        "event": "request",
        "request_id": "r.1",
        "method": "GET",
        "route": "/things/<name>",
        "status": 200,
        "bytes": len("secret"),
        "digest": "sha256:0",
        "release": __version__,
    }


def test_ids_of_requests_without_one_differ(app):
    client = app.test_client()
    assert len({client.get("/things/a").headers["X-Request-ID"] for _ in range(100)}) == 100


@pytest.mark.usefixtures("configured")
@pytest.mark.parametrize("propagate", [False, True])
def test_a_failure_is_a_line_even_where_nothing_answers_it(app, lines, propagate):
    app.config["PROPAGATE_EXCEPTIONS"] = propagate
    if propagate:
        with pytest.raises(StrangeError, match="a secret"):
            app.test_client().get("/fails")
    else:
        app.test_client().get("/fails")
    *before, line = lines()
    assert (line["level"], line["status"]) == ("error", 500)
    if not propagate:
        (failure,) = before
        assert "secret" not in str(failure)
        assert failure["request_id"] == line["request_id"]
        raised, cause = failure["exception"]
        assert (raised["class"], cause["class"]) == (f"{__name__}.StrangeError", "ValueError")
        assert raised["frames"][0].startswith("flask/app.py:")
        assert re.fullmatch(r"tests/service/test_logs\.py:\d+ fails", raised["frames"][-1])


@pytest.mark.usefixtures("configured")
def test_a_failure_without_end_is_a_line_that_ends(lines):
    def deeper():
        deeper()

    try:
        deeper()
    except RecursionError:
        logging.getLogger("deep").exception("too deep")
    (line,) = lines()
    (failure,) = line["exception"]
    assert failure["class"] == "RecursionError"
    assert len(failure["frames"]) == 40


@pytest.mark.usefixtures("configured")
def test_other_loggers_and_warnings_come_out_the_same_way(app, lines):
    app.test_client().get("/warns", headers={"X-Request-ID": "w"})
    logging.getLogger("elsewhere").info("below the level")
    with warnings.catch_warnings():
        warnings.simplefilter("always")
        warnings.warn("worn", stacklevel=1)
    said, request, warned = lines()
    assert (said["event"], said["logger"], said["level"]) == ("take care", "somewhere", "warning")
    assert said["request_id"] == request["request_id"] == "w"
    assert warned["logger"] == "py.warnings"
    assert "worn" in warned["event"]
    assert "request_id" not in warned


def test_an_answer_does_not_depend_on_its_log(app):
    kept = os.dup(1)
    reader, writer = os.pipe()
    os.close(reader)  # whoever read the log went away
    os.dup2(writer, 1)
    try:
        answer = app.test_client().get("/things/a")
    finally:
        os.dup2(kept, 1)
        os.close(kept)
        os.close(writer)
    assert answer.status_code == 200


@pytest.mark.usefixtures("configured")
def test_a_failure_behind_the_routes_quotes_no_path_either(lines):
    made = create_app()

    @made.after_request
    def fail(_response):
        raise ValueError("secret")

    response = made.test_client().post("/secret?secret=1", data=b"secret")
    assert response.status_code == 500
    said = lines()
    assert said[0]["exception"][0]["class"] == "ValueError"
    assert said[-1]["status"] == 500
    assert "secret" not in str(said)
