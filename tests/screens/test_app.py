"""The app as it is started: `streamlit run app.py`."""

from __future__ import annotations

import os
import socket
import subprocess
import sys
import time
import tomllib
import urllib.error
import urllib.request
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def free_port():
    with socket.socket() as held:
        held.bind(("127.0.0.1", 0))
        return held.getsockname()[1]


def fetch(url):
    try:
        with urllib.request.urlopen(url, timeout=5) as answer:
            return answer.status, answer.read().decode()
    except (urllib.error.URLError, ConnectionError):
        return None, ""


def test_the_app_starts_and_answers(tmp_path):
    port = free_port()
    log = tmp_path / "log"
    with log.open("w") as out:
        server = subprocess.Popen(
            [sys.executable, "-m", "streamlit", "run", "app.py", "--server.port", str(port)],
            cwd=ROOT,
            env={**os.environ, "no_proxy": "127.0.0.1"},
            stdout=out,
            stderr=subprocess.STDOUT,
        )
    try:
        for _ in range(120):
            if fetch(f"http://127.0.0.1:{port}/_stcore/health")[0] == 200 or server.poll() is not None:
                break
            time.sleep(0.25)
        assert server.poll() is None, log.read_text()
        status, page = fetch(
            f"http://127.0.0.1:{port}/model"
        )  # a page by its address, before anybody came by the router
        assert status == 200
        assert "<html" in page.lower()
        time.sleep(2)  # the imports ahead of time are under way by then, and would have complained
        assert "could not import" not in log.read_text()
    finally:
        server.terminate()
        server.wait(20)


def test_the_configuration_keeps_the_app_to_this_machine():
    config = tomllib.loads((ROOT / ".streamlit" / "config.toml").read_text())
    assert config["server"]["address"] == "127.0.0.1"
    assert config["browser"]["gatherUsageStats"] is False
    assert config["client"]["showErrorDetails"] == "none"
