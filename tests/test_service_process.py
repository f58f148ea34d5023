"""A real server in a process of its own: departures, full queues, huge bodies."""

from __future__ import annotations

import http.client
import json
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest

from tests.service_support import REQUEST

ROOT = Path(__file__).resolve().parent.parent
WAIT_S = 30.0  # far below the minute after which the slow solver ends by itself
JSON = {"Content-Type": "application/json"}
SLOW = json.dumps(REQUEST).encode()
QUICK = json.dumps({**REQUEST, "mass_kg": 500}).encode()


def free_port() -> int:
    """Return a port that was free just now."""
    with closing(socket.socket()) as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@pytest.fixture(scope="module")
def port(tmp_path_factory: pytest.TempPathFactory) -> Iterator[int]:
    found = free_port()
    folder = str(tmp_path_factory.mktemp("process"))
    command = [sys.executable, "-m", "tests.service_process", folder, str(found)]
    with subprocess.Popen(command, cwd=ROOT, stderr=subprocess.PIPE) as process:
        try:
            until(lambda: alive(found) or process.poll() is not None)
            assert process.poll() is None
            yield found
        finally:
            process.terminate()
            process.wait(WAIT_S)


def until(condition: Callable[[], bool]) -> None:
    """Wait until something holds."""
    end = time.monotonic() + WAIT_S
    while not condition():
        assert time.monotonic() < end, "it never came true"
        time.sleep(0.02)


def alive(port: int) -> bool:
    try:
        return health(port)["status"] == "ok"
    except OSError:
        return False


def call(port: int, method: str, path: str, body: bytes | None = None) -> tuple[int, Any, bytes]:
    """Return status, headers and body of one request on a connection of its own."""
    with closing(http.client.HTTPConnection("127.0.0.1", port, timeout=WAIT_S)) as connection:
        connection.request(method, path, body, JSON if body is not None else {})
        response = connection.getresponse()
        return response.status, response.headers, response.read()


def health(port: int) -> Any:
    return json.loads(call(port, "GET", "/health")[2])


def ask(port: int, body: bytes) -> socket.socket:
    """Send a footprint request and return the connection without waiting for the answer."""
    connection = socket.create_connection(("127.0.0.1", port), WAIT_S)
    head = (
        "POST /api/footprint HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
        f"Content-Length: {len(body)}\r\n\r\n"
    )
    connection.sendall(head.encode() + body)
    return connection


def places(port: int, solving: int, waiting: int) -> bool:
    return health(port) == {"status": "ok", "solving": solving, "waiting": waiting}


def test_a_full_queue_is_refused_health_answers_and_departures_free_the_places(port: int) -> None:
    clients = [ask(port, SLOW) for _ in range(2)]
    until(lambda: places(port, 2, 0))  # both places for solves are taken, and /health answers
    clients += [ask(port, SLOW) for _ in range(8)]
    until(lambda: places(port, 2, 8))
    status, headers, body = call(port, "POST", "/api/footprint", QUICK)
    assert status == 503
    assert json.loads(body)["type"] == "/problems/too-busy"
    assert int(headers["Retry-After"]) > 0
    clients.pop(0).close()  # one solve stops, a waiting one takes its place
    until(lambda: places(port, 2, 7))
    clients.pop().close()  # one that waits never starts
    until(lambda: places(port, 2, 6))
    for client in clients:
        client.close()
    until(lambda: places(port, 0, 0))
    assert call(port, "POST", "/api/footprint", QUICK)[0] == 200


def test_whoever_waits_is_told_when_the_service_is_stopped(tmp_path: Path) -> None:
    found = free_port()
    command = [sys.executable, "-m", "tests.service_process", str(tmp_path), str(found)]
    with subprocess.Popen(command, cwd=ROOT, stderr=subprocess.PIPE) as process:
        try:
            until(lambda: alive(found) or process.poll() is not None)
            clients = [ask(found, SLOW) for _ in range(4)]
            until(lambda: places(found, 2, 2))
            process.terminate()
            for client in clients:
                answer = http.client.HTTPResponse(client)
                answer.begin()
                assert answer.status == 503
                assert json.loads(answer.read())["type"] == "/problems/solve-stopped"
                client.close()
            process.wait(2.5)  # less than the grace: nothing was left to wait for
            assert process.stderr is not None
            assert process.stderr.read() == b""
        finally:
            process.kill()


def test_a_body_of_50_mb_is_refused_and_the_service_goes_on(port: int) -> None:
    status, headers, body = call(port, "POST", "/api/footprint", b"[" + b" " * 50_000_000 + b"]")
    assert status == 413
    assert headers["Content-Type"] == "application/problem+json"
    assert json.loads(body)["type"] == "/problems/body-too-large"
    assert alive(port)


def test_a_body_without_a_length_is_refused_while_it_streams(port: int) -> None:
    with socket.create_connection(("127.0.0.1", port), WAIT_S) as client:
        client.sendall(
            b"POST /api/footprint HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
            b"Transfer-Encoding: chunked\r\n\r\n"
        )
        for _ in range(26):  # 260 000 bytes, a little more than the limit; the end never comes
            client.sendall(b"2710\r\n" + b" " * 10_000 + b"\r\n")
        assert client.recv(4096).startswith(b"HTTP/1.1 413 ")
    assert alive(port)


def test_a_body_of_100_000_levels_is_refused_and_the_service_goes_on(port: int) -> None:
    status, _, body = call(port, "POST", "/api/footprint", b"[" * 100_000 + b"]" * 100_000)
    assert status == 400
    assert json.loads(body)["type"] == "/problems/nesting-too-deep"
    assert alive(port)


@pytest.mark.parametrize("path", ["/", "/health", "/api/catalog", "/static/index.html"])
def test_head_over_the_wire(port: int, path: str) -> None:
    status, headers, body = call(port, "HEAD", path)
    assert (status, body) == (200, b"")
    assert int(headers["Content-Length"]) > 0


def test_one_connection_serves_several_requests(port: int) -> None:
    with closing(http.client.HTTPConnection("127.0.0.1", port, timeout=WAIT_S)) as connection:
        for method, path in (("HEAD", "/"), ("GET", "/health"), ("HEAD", "/health"), ("GET", "/")):
            connection.request(method, path)
            response = connection.getresponse()
            response.read()
            assert response.status == 200
