"""The app as a process that tests start, kill and start again."""

from __future__ import annotations

import os
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


class Server:
    """One server on a port of its own, with its own store of drafts."""

    def __init__(self, folder: Path) -> None:
        with socket.socket() as held:
            held.bind(("127.0.0.1", 0))
            self.port = held.getsockname()[1]
        self.url = f"http://127.0.0.1:{self.port}"
        self.drafts = folder / "drafts.sqlite"
        self.log = folder / "log"
        self.process: subprocess.Popen[bytes] | None = None
        self.options: list[str] = []

    def start(self) -> None:
        with self.log.open("ab") as out:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "streamlit", "run", "app.py", "--server.port", str(self.port), *self.options],
                cwd=ROOT,
                env={**os.environ, "NGM_DRAFTS": str(self.drafts)},
                stdout=out,
                stderr=subprocess.STDOUT,
            )
        opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
        deadline = time.monotonic() + 60
        while time.monotonic() < deadline and self.process.poll() is None:
            try:
                with opener.open(f"{self.url}/_stcore/health", timeout=2):
                    return
            except (urllib.error.URLError, OSError):
                time.sleep(0.1)
        raise RuntimeError(f"the server did not start:\n{self.log.read_text()}")

    def kill(self) -> None:
        """End it as a power cut would."""
        assert self.process is not None
        self.process.kill()
        self.process.wait(20)

    def stop(self) -> None:
        assert self.process is not None
        self.process.terminate()
        try:
            self.process.wait(10)
        except subprocess.TimeoutExpired:
            self.kill()
