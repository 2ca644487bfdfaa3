"""A server in a process of its own, and the small problem that most tests send."""

import os
import re
import signal
import subprocess
import sys
import time
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import httpx2

START_SECONDS = 60

# The straight line: y(x) = 2 x / 3, and the integral of y'^2 is (2/3)^2 * 3 = 4/3 m.
LINE = {
    "format": 1,
    "title": "Line between two pegs",
    "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
    "unknowns": {"y": {"unit": "m"}},
    "functional": {"seek": "minimum", "integrand": "y'^2"},
    "endpoints": ["y(0) = 0", "y(3) = 2"],
}
LINE_VALUE = 4 / 3


@dataclass(frozen=True)
class Server:
    """Where it listens, and its process."""

    address: str
    process: subprocess.Popen

    def kill(self):
        """End it as a crash would."""
        self.process.send_signal(signal.SIGKILL)
        self.process.wait()


@contextmanager
def serving(data: Path, *options: str, **environment: str):
    """A server on a free port; ready when the block begins, ended when it is left."""
    command = [sys.executable, "-m", "service", "serve", "--port", "0", "--data", str(data), *options]
    log = data.parent / f"{data.name}.log"
    with log.open("w") as errors:
        process = subprocess.Popen(
            command, stdout=subprocess.PIPE, stderr=errors, text=True, env={**os.environ, **environment}
        )
    try:
        said = process.stdout.readline()
        found = re.search(r"http://\S+", said)
        assert found, f"the server said {said!r} and {log.read_text()!r}"
        address = found[0].replace("0.0.0.0", "127.0.0.1")
        _until_ready(address)
        yield Server(address, process)
    finally:
        process.terminate()
        try:
            process.wait(15)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
        process.stdout.close()


def _until_ready(address):
    end = time.monotonic() + START_SECONDS
    while httpx2.get(f"{address}/readyz").status_code != 200:
        assert time.monotonic() < end, "the server did not become ready"
        time.sleep(0.05)
