"""The server as a client, a load balancer and an operator meet it."""

import concurrent.futures
import contextlib
import http.client
import re
import signal
import socket
import threading
import time

import pytest

from service import __version__

pytestmark = pytest.mark.live

PATH = "/v1/stoichiometric-table"
"""A route that reads a body; what is asked of it here is refused, quickly."""


def test_it_is_alive_and_ready(server):
    assert server.get("/healthz").json()["status"] == "alive"
    assert server.get("/readyz").json()["status"] == "ready"


def test_it_does_not_say_which_server_it_is(server):
    headers = server.get("/healthz").headers
    assert headers["Server"] is None
    assert "gunicorn" not in str(headers).lower()
    assert "werkzeug" not in str(headers).lower()


@pytest.mark.parametrize("name", ["a", "K-410_night.7", "x" * 64])
def test_a_request_id_comes_back(server, name):
    assert server.get("/healthz", **{"X-Request-ID": name}).headers["X-Request-ID"] == name


@pytest.mark.parametrize("name", ["", "x" * 65, "a b", "{}", "ü"])
def test_an_unfit_request_id_is_replaced(server, name):
    given = server.get("/healthz", **{"X-Request-ID": name}).headers["X-Request-ID"]
    assert re.fullmatch("[0-9a-f]{24}", given)


def test_every_request_is_a_line_of_the_log(server):
    sent = "log-line.1"
    answer = server.post(f"{PATH}?secret=query", {"secret": "body"}, **{"X-Request-ID": sent})
    line = server.logged(sent)
    assert list(line)[:3] == ["time", "level", "event"]
    assert re.fullmatch(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{3}\+00:00", line.pop("time"))
    assert 0 < line.pop("milliseconds") < 10_000
    assert line.pop("pid") != server.pid, "a worker answers"
    assert line == {
        "level": "info",
        "event": "request",
        "request_id": sent,
        "method": "POST",
        "route": PATH,
        "status": answer.status,
        "bytes": len(answer.body),
        "release": __version__,
        "code": answer.problem()["type"].removeprefix("/problems/"),
    }


def test_an_unknown_route_is_a_problem_and_its_path_is_not_logged(server):
    answer = server.get("/no/such/route", **{"X-Request-ID": "no-route"})
    assert answer.status == 404
    assert answer.problem()["type"] == "/problems/no-such-route"
    line = server.logged("no-route")
    assert (line["route"], line["status"], line["code"]) == (None, 404, "no-such-route")
    assert "/no/such/route" not in str(line)


def test_the_log_says_which_route_refused_the_method(server):
    assert server.request("PUT", f"{PATH}?x=1", headers={"X-Request-ID": "put.1"}).status == 405
    line = server.logged("put.1")
    assert (line["route"], line["code"]) == (PATH, "method-not-allowed")


def test_an_answer_without_its_body_has_no_bytes(server):
    answer = server.request("HEAD", "/healthz", headers={"X-Request-ID": "head.1"})
    assert (answer.status, answer.body) == (200, b"")
    assert server.logged("head.1")["bytes"] == 0


HEAD = f"POST {PATH} HTTP/1.1\r\nHost: here\r\nContent-Type: application/json\r\n".encode()


@pytest.mark.parametrize(
    ("data", "status", "code"),
    [
        (b"GARBAGE\r\n\r\n", 400, "malformed-http"),
        (b"\x16\x03\x01\x02\x00\x01\x00\x01\xfc\x03\x03\r\n\r\n", 400, "malformed-http"),  # TLS
        (b"GET / HTTP/1.1\r\nHost: here\r\nno colon\r\n\r\n", 400, "malformed-http"),
        (
            b"GET / HTTP/1.1\r\nContent-Length: 1\r\nContent-Length: 2\r\n\r\n",
            400,
            "malformed-http",
        ),
        (b"GET /" + b"a" * 5000 + b" HTTP/1.1\r\n\r\n", 414, "request-line-too-long"),
        (b"GET / HTTP/1.1\r\nX-A: " + b"a" * 9000 + b"\r\n\r\n", 431, "header-too-large"),
        (b"GET / HTTP/1.1\r\n" + b"X-A: a\r\n" * 60 + b"\r\n", 431, "header-too-large"),
        (b"GET / HTTP/1.1\r\nExpect: tea\r\n\r\n", 417, "expectation-failed"),
        (HEAD + b"Transfer-Encoding: br\r\n\r\n", 501, "unsupported-transfer-coding"),
        (HEAD + b"Transfer-Encoding: chunked\r\n\r\nZZ\r\n{}\r\n0\r\n\r\n", 400, "malformed-http"),
        (HEAD + b"Transfer-Encoding: chunked\r\n\r\n2\r\n{}XX\r\n0\r\n\r\n", 400, "malformed-http"),
    ],
)
def test_what_is_not_http_is_a_problem_too(server, data, status, code):
    answer = server.raw(data)
    assert answer.status == status
    assert answer.problem()["type"] == f"/problems/{code}"
    assert answer.headers["X-Content-Type-Options"] == "nosniff"
    assert answer.headers["Cache-Control"] == "no-store"
    line = server.logged(answer.headers["X-Request-ID"])
    assert (line["event"], line["status"], line["code"]) == ("request", status, code)
    assert (line["bytes"], line["release"]) == (len(answer.body), __version__)
    assert line["milliseconds"] > 0
    assert line["level"] == "info"


@pytest.mark.parametrize(
    "body",
    [b"Transfer-Encoding: chunked\r\n\r\n9\r\n{}", b"Content-Length: 9\r\n\r\n{}"],
    ids=["chunked", "declared"],
)
def test_a_body_cut_short_is_never_taken_for_a_whole_one(server, body):
    name = f"cut-short.{len(body)}"
    with server.connect() as sock:
        sock.sendall(HEAD + f"X-Request-ID: {name}\r\n".encode() + body)
        sock.shutdown(socket.SHUT_WR)
        assert b" 400 " in sock.recv(65536).splitlines()[0]
    assert server.logged(name)["code"] == "malformed-http"


def test_a_body_that_is_too_large_is_refused(start_server):
    with start_server("--workers", "1", "--max-body", "1000") as server:
        for declared in (b"Content-Length: 1001\r\n\r\n", b"Content-Length: 99999999999\r\n\r\n"):
            # Refused by its declaration: nothing of it need arrive.
            answer = server.raw(HEAD + declared)
            assert answer.status == 413
            assert answer.problem()["type"] == "/problems/body-too-large"
            assert answer.headers["Connection"] == "close"
        assert server.post(PATH, b" " * 100_000).status == 413
        chunk = b"190\r\n" + b" " * 0x190 + b"\r\n"
        chunked = HEAD + b"Transfer-Encoding: chunked\r\n\r\n" + 3 * chunk + b"0\r\n\r\n"
        assert server.raw(chunked).status == 413
        assert server.post(PATH, b" " * 1000).status == 400


@pytest.mark.parametrize(
    ("path", "size", "status"),
    [(PATH, 17_000_000, 413), ("/v1/nothing", 5_000_000, 404), (f"{PATH}?x=1", 5_000_000, 400)],
)
def test_a_refusal_reaches_a_client_that_is_still_sending(server, path, size, status):
    for _ in range(3):
        answer = server.post(path, b" " * size)
        assert answer.status == status
        assert answer.headers["Connection"] == "close"
        answer.problem()


def test_a_connection_outlives_refusals_of_what_was_read(server):
    connection = http.client.HTTPConnection(*server.address, timeout=30)
    with contextlib.closing(connection):
        for body in (b"{}", b"not JSON", b"[" * 100_000):
            connection.request("POST", PATH, body, {"Content-Type": "application/json"})
            answer = connection.getresponse()
            assert answer.status == 400
            assert answer.headers["Connection"] == "keep-alive"
            answer.read()


def test_nothing_is_believed_of_the_way_a_request_came(start_server):
    everything = {
        "FORWARDED_ALLOW_IPS": "*",
        "SCRIPT_NAME": "/elsewhere",
        "WEB_CONCURRENCY": "none at all",
        "PORT": "1",
    }
    with start_server("--workers", "1", **everything) as server:
        said = {"SCRIPT_NAME": "/healthz", "Script-Name": "/x", "X-Forwarded-Proto": "https"}
        assert server.get("/healthz", **said, PATH_INFO="/readyz").json() == {"status": "alive"}
        assert server.get("/elsewhere/healthz").status == 404
        assert server.url in server.get("/", **said).json()["try"]


@pytest.mark.parametrize(
    "target", [b"http://here", b"http://here?pretty=1", b"/?pretty=1", b"http://here/"]
)
def test_every_way_to_ask_for_the_root(server, target):
    answer = server.raw(b"GET " + target + b" HTTP/1.1\r\nHost: here\r\n\r\n")
    assert answer.status == 200
    assert answer.json()["service"] == "Molwright"


def test_no_target_is_sent_elsewhere_in_html(server):
    for target in (
        b"*",
        b"//",
        b"/%2e%2e",
        b"//x/..",
        b"/v1",
        b"/problems/",
        b"/healthz/",
        b"/%ff",
    ):
        answer = server.raw(b"GET " + target + b" HTTP/1.1\r\nHost: here\r\n\r\n")
        assert answer.status in (200, 400, 404)
        assert "json" in answer.headers["Content-Type"]


@pytest.mark.parametrize(
    "host",
    [None, b"", b"a b", b"a'b", b"<script>", "\u00fc".encode(), b"a" * 70, b"[", b"a..b", b"@"],
)
def test_an_odd_host_is_no_fault_of_ours(server, host):
    head = b"" if host is None else b"Host: " + host + b"\r\n"
    answer = server.raw(b"GET / HTTP/1.1\r\n" + head + b"\r\n")
    assert answer.status in (200, 400)
    if answer.status == 200 and host not in (b"a..b", b"["):
        assert f"'{server.url}/v1/" in answer.json()["try"]


def test_whatever_is_asked_for_a_log_quotes_no_request(start_server):
    with start_server("--workers", "1", "--log-level", "DEBUG") as server:
        for path in ("/secret", "/secret?secret=1", f"{PATH}?secret=1", "/problems/secret"):
            server.post(path, b'"secret"', **{"X-Secret": "secret", "SCRIPT_NAME": "/secret"})
        server.post(PATH, {"secret": "secret"}, **{"X-Request-ID": "secret secret"})
        for broken in (
            b"SECRET /secret HTTP/9.9\r\n\r\n",
            b"GET /secret HTTP/1.1\r\nsecret : secret\r\n\r\n",
            b"GET /secret HTTP/1.1\r\nHost: secret\r\nHost: secret\r\n\r\n",
            HEAD + b"Content-Length: secret\r\n\r\n",
            HEAD + b"Transfer-Encoding: chunked\r\n\r\nsecret\r\n",
            HEAD + b"Expect: secret\r\n\r\n",
        ):
            assert server.raw(broken).status < 500
        for cut in (b"GET /secret HT", b"GET /secret HTTP/1.1\r\nsecret: sec", HEAD + b"\r\n"):
            with server.connect() as sock:
                sock.sendall(cut)
                sock.shutdown(socket.SHUT_WR)
                sock.recv(65536)
        assert server.get("/healthz", **{"X-Request-ID": "last"}).status == 200
        text = "\n".join(str(line) for line in server.log_lines())
    assert "'last'" in text
    assert "secret" not in text.lower().replace("'method': 'secret'", "")


def asking(server, stop, answers):
    """Ask in a loop, each time on a new connection, until told to stop."""
    while not stop.is_set():
        try:
            answers.append(server.get("/healthz").status)
        except (OSError, http.client.HTTPException) as error:
            answers.append(error)


def test_a_reload_loses_nothing(start_server):
    with start_server("--workers", "2") as server:
        stop, answers = threading.Event(), []
        askers = [threading.Thread(target=asking, args=(server, stop, answers)) for _ in range(4)]
        for asker in askers:
            asker.start()
        before = {line["pid"] for line in server.log_lines() if "Booting" in line["event"]}
        for _ in range(2):
            time.sleep(0.4)
            server.signal(signal.SIGHUP)
        time.sleep(1)
        stop.set()
        for asker in askers:
            asker.join()
        booted = {line["pid"] for line in server.log_lines() if "Booting" in line["event"]}
        assert len(booted - before) >= 2, "the workers were not replaced"
        assert len(answers) > 50
        assert set(answers) == {200}


def test_a_stop_finishes_what_is_under_way(start_server):
    with start_server("--workers", "1") as server:
        with server.connect() as sock:
            sock.sendall(HEAD + b"X-Request-ID: last\r\nContent-Length: 2\r\n\r\n{")
            time.sleep(0.3)  # its thread waits for the rest
            server.signal(signal.SIGTERM)
            time.sleep(0.3)
            sock.sendall(b"}")
            with http.client.HTTPResponse(sock) as answer:
                answer.begin()
                assert answer.status == 400
                assert answer.read().endswith(b"}\n")
        assert server.exit_code() == 0
        assert server.logged("last")["status"] == 400
        with pytest.raises(ConnectionRefusedError):
            server.connect()


@pytest.mark.parametrize(
    ("number", "said"),
    [(signal.SIGINT, HEAD + b"Content-Length: 2\r\n\r\n{"), (signal.SIGQUIT, b"")],
)
def test_an_interrupt_waits_for_no_client(start_server, number, said):
    with start_server("--workers", "2") as server, server.connect() as sock:
        sock.sendall(said)
        time.sleep(0.3)  # its thread waits for more
        began = time.monotonic()
        server.signal(number)
        assert server.exit_code() == 0
        assert time.monotonic() - began < 3


def test_an_interrupt_in_the_middle_of_traffic_is_heard(start_server):
    for _ in range(2):
        with start_server("--workers", "2") as server:
            stop, answers = threading.Event(), []
            askers = [
                threading.Thread(target=asking, args=(server, stop, answers)) for _ in range(4)
            ]
            for asker in askers:
                asker.start()
            time.sleep(0.3)
            began = time.monotonic()
            server.signal(signal.SIGINT)
            assert server.exit_code() == 0
            assert time.monotonic() - began < 3
            stop.set()
            for asker in askers:
                asker.join()
            assert answers.count(200) > 10


def test_slow_clients_do_not_keep_good_ones_waiting(start_server):
    # All threads but one are held, whichever process accepted first, by clients that send a
    # byte now and then: some in the header, some in the body, some have not said a word.
    with contextlib.ExitStack() as stack:
        server = stack.enter_context(start_server("--workers", "2", "--threads", "8"))
        slow = [stack.enter_context(server.connect()) for _ in range(15)]
        silent = slow[2::3]
        for number, sock in enumerate(slow):
            sock.sendall([HEAD[:20], HEAD + b"Content-Length: 100\r\n\r\n{", b""][number % 3])
        took = []
        for _ in range(30):
            began = time.monotonic()
            assert server.get("/healthz").status == 200
            took.append(time.monotonic() - began)
            for sock in slow:
                if sock not in silent:
                    sock.sendall(b" ")
    assert max(took) < 3


@pytest.mark.parametrize(
    "data", [b"GARBAGE\r\n\r\n", b"GET /healthz HTTP/1.1\r\nHost: h\r\nConnection: close\r\n\r\n"]
)
def test_a_client_that_does_not_hang_up_holds_up_nobody(start_server, data):
    with start_server("--workers", "1") as server, server.connect() as sock:
        sock.sendall(data)
        assert sock.recv(65536)
        time.sleep(0.2)
        began = time.monotonic()
        assert server.get("/healthz").status == 200
        assert time.monotonic() - began < 1.5


def test_many_clients_at_once_are_all_answered(server):
    with concurrent.futures.ThreadPoolExecutor(32) as pool:
        answers = list(pool.map(lambda _: server.get("/healthz").status, range(320)))
    assert answers == [200] * 320
