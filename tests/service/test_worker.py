"""What of the web server's worker shows without a server."""

import contextlib
import signal
import threading
from concurrent.futures import ThreadPoolExecutor

import pytest
from gunicorn.workers.gthread import PollableMethodQueue

from service import server


@pytest.fixture
def worker():
    """A worker at rest: its threads and its queue, without sockets and settings."""
    made = object.__new__(server._Worker)
    made.alive = True
    made.method_queue = PollableMethodQueue()
    made.method_queue.init()
    made.tpool = ThreadPoolExecutor(max_workers=1)
    yield made
    made.tpool.shutdown()
    made.method_queue.close()


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGQUIT])
def test_a_signal_handler_waits_for_no_lock_of_the_thread_that_it_interrupts(worker, number):
    # The main thread holds this lock while it hands a connection to a thread.
    with worker.tpool._shutdown_lock:
        handling = threading.Thread(target=worker.handle_quit, args=(number, None), daemon=True)
        handling.start()
        handling.join(5)
        assert not handling.is_alive()
    assert worker.alive
    with pytest.raises(SystemExit) as stopped:
        worker.method_queue.run_callbacks(None)
    assert stopped.value.code == 0
    assert not worker.alive


@pytest.mark.parametrize(
    ("reason", "code"), [(SystemExit(0), 0), (SystemExit(3), 3), (RuntimeError(), 1)]
)
def test_a_process_ends_with_the_code_that_it_was_to_end_with(monkeypatch, reason, code):
    ended = []
    monkeypatch.setattr(server.os, "_exit", ended.append)
    with contextlib.suppress(SystemExit, RuntimeError):
        try:
            raise reason
        finally:
            server._leave(None, None)
    assert ended == [code]
