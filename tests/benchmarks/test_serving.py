"""The server as a process: how soon it is ready, how much memory it takes, what an answer costs beyond its solve."""

from __future__ import annotations

import compileall
import json
import os
import re
import statistics
import subprocess
import sys
import time
from contextlib import closing
from http.client import HTTPConnection
from pathlib import Path

import pytest

from service import samples
from service.assemble import assemble
from service.spec import read
from service.threads import ONE_THREAD
from solvers.solve import solve

ROOT = Path(__file__).parents[2]
MEGABYTE = 1024
TICKS = os.sysconf("SC_CLK_TCK")


@pytest.fixture(scope="module", autouse=True)
def _installed():
    """Byte code beside the source, as an installation leaves it; else every start of a checkout would compile."""
    for package in ("service", "solvers", "web"):
        compileall.compile_dir(ROOT / package, quiet=2)


class Served:
    """A server of our own on any free port; `ready_after` seconds it is ready, having used `processor` seconds."""

    def __init__(self, data: Path, *options: str) -> None:
        began = time.perf_counter()
        command = [sys.executable, "-m", "service", "serve", "--port", "0", "--data", str(data), *options]
        self.process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
        self.port = int(re.search(r":(\d+)", self.process.stdout.readline())[1])
        while self.ask("GET", "/readyz")[0] != 200:
            time.sleep(0.01)
        self.ready_after = time.perf_counter() - began
        self.processor = sum(map(processor_time, (self.process.pid, *self.workers)))

    @property
    def workers(self) -> list[int]:
        found = []
        for task in Path(f"/proc/{self.process.pid}/task").iterdir():
            found += [int(child) for child in (task / "children").read_text().split()]
        return found

    def ask(self, method: str, path: str, body: bytes | None = None, **headers: str) -> tuple[int, bytes]:
        """Status and body of an answer."""
        with closing(HTTPConnection("127.0.0.1", self.port)) as connection:
            connection.request(method, path, body, {name.replace("_", "-"): value for name, value in headers.items()})
            answer = connection.getresponse()
            return answer.status, answer.read()

    def solve(self, document: bytes) -> tuple[float, dict]:
        """Seconds until the answer to a waiting POST, and the result document."""
        began = time.perf_counter()
        _, body = self.ask("POST", "/api/v1/runs", document, content_type="application/json", prefer="wait=60")
        elapsed = time.perf_counter() - began
        run = json.loads(body)
        assert run["state"] == "finished", run
        return elapsed, json.loads(self.ask("GET", f"/api/v1/runs/{run['id']}/result")[1])

    def close(self) -> None:
        self.process.terminate()
        self.process.wait(20)
        self.process.stdout.close()


def processor_time(pid: int) -> float:
    """Seconds of processor that a process has used."""
    fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
    return (int(fields[11]) + int(fields[12])) / TICKS


def proportional_memory(pid: int) -> float:
    """Memory of a process in MB, shared pages counted in proportion."""
    return int(re.search(r"^Pss: +(\d+) kB", Path(f"/proc/{pid}/smaps_rollup").read_text(), re.M)[1]) / MEGABYTE


def hose(metres: float) -> bytes:
    """The hose of another length, so that nothing can be remembered from an earlier answer."""
    document = samples.load("hose")
    document["constants"]["l"] = f"{metres:.4f} m"
    return json.dumps(document).encode()


def test_a_server_is_soon_ready(benchmark, tmp_path):
    """Wanted here, with as many workers as there are cores: 2 s, as the median of several starts on an idle machine."""
    starts: list[tuple[float, float]] = []

    def start() -> None:
        server = Served(tmp_path / str(len(starts)))
        starts.append((server.ready_after, server.processor))
        server.close()

    benchmark.pedantic(start, rounds=7, warmup_rounds=1)
    ready, processor = (statistics.median(figures) for figures in zip(*starts[1:], strict=True))
    benchmark.extra_info |= {"ready_s": ready, "processor_s": processor}


@pytest.mark.skipif(not Path("/proc/self/smaps_rollup").exists(), reason="the kernel tells no proportional memory")
def test_a_server_stays_small(benchmark, tmp_path):
    """Wanted: the web process at most 150 MB, a waiting worker at most 100 MB, unused and after use."""
    server = Served(tmp_path)
    try:
        pid = server.process.pid
        unused = proportional_memory(pid), max(map(proportional_memory, server.workers))
        for sample in ("hose", "crucible", "ramp"):
            _, result = server.solve(samples.text(sample).encode())
            assert server.ask("GET", f"/runs/{result['id']}", accept="text/html")[0] == 200
        for path in ("/", "/compose?sample=hose", "/reference", "/runs"):
            assert server.ask("GET", path, accept="text/html")[0] == 200
        time.sleep(2)  # what pages need is loaded, and the workers have given back what they do not need
        used = (
            benchmark.pedantic(proportional_memory, args=(pid,), rounds=1),
            max(map(proportional_memory, server.workers)),
        )
    finally:
        server.close()
    benchmark.extra_info |= {"web_mb": unused[0], "worker_mb": unused[1], "web_used_mb": used[0]}
    benchmark.extra_info["worker_used_mb"] = used[1]
    assert max(unused[0], used[0]) <= 150
    assert max(unused[1], used[1]) <= 100


def test_an_answer_costs_little_beyond_its_solve(benchmark, tmp_path, monkeypatch):
    """Wanted here: at most 15 ms, as the median of many on a warm server.

    The solve itself is what the worker's solver took, checks included; reading the document there counts as beyond.
    `alone_ms` is the same solve in this process, turn by turn and with nothing beside it, so that what else happens
    in the worker cannot hide in its time: `beyond_alone_ms` is the whole answer less that.
    """
    for name, value in ONE_THREAD.items():
        monkeypatch.setenv(name, value)
    server = Served(tmp_path, "--workers", "1")
    lengths = (4.2 + 0.001 * number for number in range(1000))
    beyond, whole, solving, alone = [], [], [], []

    def once() -> None:
        document = hose(next(lengths))
        elapsed, result = server.solve(document)
        times = result["provenance"]["times"]
        spent = sum(seconds for stage, seconds in times.items() if stage != "read")
        problem = assemble(read(document))
        began = time.perf_counter()
        solve(problem)
        alone.append(time.perf_counter() - began)
        beyond.append(elapsed - spent)
        whole.append(elapsed)
        solving.append(spent)

    try:
        benchmark.pedantic(once, rounds=30, warmup_rounds=3)
    finally:
        server.close()
    figures = {"beyond": beyond, "whole": whole, "solve": solving, "alone": alone}
    median = {name: 1e3 * statistics.median(laps[3:]) for name, laps in figures.items()}
    benchmark.extra_info |= {f"{name}_ms": value for name, value in median.items()}
    benchmark.extra_info["beyond_alone_ms"] = median["whole"] - median["alone"]
