"""A real server process: its one line, its port, a kill in mid-work, a clean end."""

import json
import os
import signal
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
import uuid

import pytest

from curvebank_web import server


def ask(address, path, body=None, method=None):
    """One request; the parsed JSON answer."""
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(address + path, data, {"Content-Type": "application/json"}, method=method)
    with urllib.request.urlopen(request, timeout=60) as response:
        return json.loads(response.read())


class Served:
    """A server process and the address it printed."""

    def __init__(self, bank, cache, *arguments):
        command = [sys.executable, "-m", "curvebank_web.server", "--bank", str(bank), *arguments]
        env = os.environ | {"XDG_CACHE_HOME": str(cache), "LOCALAPPDATA": str(cache)}
        self.process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=env)
        self.address = self.process.stdout.readline().strip().rstrip("/")

    def end(self, number=signal.SIGTERM):
        self.process.send_signal(number)
        out, err = self.process.communicate(timeout=60)
        return out, err, self.process.returncode


@pytest.fixture
def serve(tmp_path):
    """Start servers on one bank; all are ended afterwards."""
    started = []

    def start(*arguments, bank=None):
        served = Served(bank or tmp_path / "bank.db", tmp_path / "cache", *arguments)
        started.append(served)
        return served

    yield start
    for served in started:
        if served.process.poll() is None:
            served.process.kill()
        served.process.communicate()


def test_it_makes_a_missing_bank_prints_its_address_alone_and_ends_cleanly(serve, tmp_path):
    served = serve("--port", "0", bank=tmp_path / "new folder" / "bank.db")
    assert served.address.startswith("http://127.0.0.1:")
    assert ask(served.address, "/healthz")["ok"] is True
    assert (tmp_path / "new folder" / "bank.db").stat().st_size > 0
    out, err, code = served.end()
    assert (out, err, code) == ("", "", 0)


def test_a_kill_in_mid_work_loses_no_acknowledged_action(serve, chart, tmp_path):
    """A client keeps writing; the server is killed without warning, twice; every step it acknowledged is there, in order."""
    served = serve("--port", "0")
    data, doc = chart
    boundary = "edge"
    head = f'--{boundary}\r\nContent-Disposition: form-data; name="file"; filename="chart.png"\r\n\r\n'.encode()
    upload = urllib.request.Request(
        served.address + "/api/sheets",
        head + data + f"\r\n--{boundary}--\r\n".encode(),
        {"Content-Type": f"multipart/form-data; boundary={boundary}"},
    )
    with urllib.request.urlopen(upload, timeout=60) as response:
        sha = json.loads(response.read())["sha256"]
    made = ask(served.address, "/api/drafts", {"doc": doc, "sheet_sha256": sha})
    draft, doc = made["id"], made["doc"]
    ask(served.address, f"/api/drafts/{draft}/run", {}, "POST")  # work goes on in a worker while we write

    acknowledged, step = [], 1
    for round_ in range(2):
        kill_at = time.monotonic() + 0.4
        while True:
            action = uuid.uuid4().hex
            body = {"doc": doc | {"x-n": len(acknowledged)}, "base_step": step, "action_id": action, "label": f"{len(acknowledged)}"}
            if time.monotonic() > kill_at and served.process.poll() is None:
                served.process.kill()
            try:
                step = ask(served.address, f"/api/drafts/{draft}", body, "PUT")["step"]
            except (OSError, urllib.error.URLError):
                break  # not acknowledged; the client keeps it and sends it again
            acknowledged.append((step, body["label"]))
        served.process.wait(timeout=30)
        served = serve("--port", "0")
        step = ask(served.address, f"/api/drafts/{draft}", body, "PUT")["step"]  # the retry, same action id
        acknowledged.append((step, body["label"]))
        assert ask(served.address, f"/api/drafts/{draft}", body, "PUT")["step"] == step
        now = ask(served.address, f"/api/drafts/{draft}")
        assert [(s["step"], s["label"]) for s in now["steps"][1:]] == acknowledged, f"round {round_}"
        assert now["doc"] == body["doc"] and now["step"] == step and now["page"]["sha256"] == sha
    assert len(acknowledged) > 4


def test_the_workers_of_a_killed_server_leave_too(serve):
    served = serve("--port", "0")
    draft = ask(served.address, "/api/drafts", {"doc": {}})
    job = ask(served.address, f"/api/drafts/{draft['id']}/run", {}, "POST")
    until = time.monotonic() + 60
    while ask(served.address, f"/api/jobs/{job['id']}")["state"] in ("queued", "running"):
        assert time.monotonic() < until
        time.sleep(0.05)
    served.process.kill()
    served.process.communicate(timeout=30)  # ends when the last process that holds the server's output has gone


class TestPorts:
    """Which port is taken."""

    def test_a_busy_port_that_was_asked_for_is_an_error_that_names_it(self):
        with socket.socket() as other:
            other.bind(("127.0.0.1", 0))
            other.listen()
            port = other.getsockname()[1]
            with pytest.raises(server.PortBusy, match=f"Port {port} "):
                server.bind(port)

    def test_zero_is_any_free_port(self):
        with server.bind(0) as first, server.bind(0) as second:
            assert first.getsockname()[0] == "127.0.0.1" and first.getsockname()[1] != second.getsockname()[1]

    def test_the_next_free_port_is_taken_when_the_usual_one_is_not_free(self, monkeypatch):
        with socket.socket() as other:
            other.bind(("127.0.0.1", 0))
            other.listen()
            usual = other.getsockname()[1]
            monkeypatch.setattr(server, "DEFAULT_PORT", usual)
            with server.bind(None) as door:
                assert usual < door.getsockname()[1] < usual + server.TRIED

    def test_a_port_that_cannot_be_is_an_error(self):
        with pytest.raises(server.PortBusy):
            server.bind(70_000)

    def test_all_taken(self, monkeypatch):
        with socket.socket() as other:
            other.bind(("127.0.0.1", 0))
            other.listen()
            monkeypatch.setattr(server, "DEFAULT_PORT", other.getsockname()[1])
            monkeypatch.setattr(server, "TRIED", 1)
            with pytest.raises(server.PortBusy, match="all taken"):
                server.bind(None)


def test_a_bank_that_is_none_is_named_and_nothing_is_served(tmp_path, capsys):
    path = tmp_path / "letter.db"
    path.write_text("Dear sir, " * 500)
    assert server.main(["--bank", str(path), "--port", "0"]) == 1
    assert "is not a bank" in capsys.readouterr().err
    assert not (tmp_path / "letter.db.desk").exists() and path.read_text().startswith("Dear sir")
