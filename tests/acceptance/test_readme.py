"""What the README says is true: its example gives its answer, and what it points to exists."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from math import asinh, cosh, sinh, sqrt
from pathlib import Path

import pytest

from service import samples
from service.cli import main

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
EXAMPLE = re.search(r"```json\n(.*?)```", README, flags=re.S)[1]
COMMAND, ANSWER = re.search(r"```\n\$ \.venv/bin/curvewright (.*?)\n(.*?)```", README, flags=re.S).groups()


@pytest.fixture(scope="module")
def bench(tmp_path_factory) -> Path:
    """An empty directory with the README's document."""
    place = tmp_path_factory.mktemp("readme")
    (place / "hose.json").write_text(EXAMPLE)
    return place


@pytest.fixture(scope="module")
def answer(bench) -> subprocess.CompletedProcess[str]:
    """The README's command, run where its document is."""
    command = [sys.executable, "-m", "service", *COMMAND.split()]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    return subprocess.run(command, cwd=bench, env=environment, capture_output=True, text=True, timeout=120)


def entries(text: str) -> dict[str, str]:
    """Lines "name   what" of the first paragraph that has any, as a mapping."""
    return dict(re.findall(r"^ +(\w+) {2,}(.+)$", text.partition("\nChecks")[0], flags=re.M))


def test_the_example_has_the_printed_answer(answer):
    shown, printed = entries(ANSWER), entries(answer.stdout)
    assert set(shown) == {"verdict", "value"}
    assert printed["verdict"] == shown["verdict"]
    # As many digits as both show; the stated error may differ from machine to machine.
    number, unit = re.match(r"([\d.]+).*\s(\S+)$", printed["value"]).groups()
    expected, expected_unit = re.match(r"([\d.]+).*\s(\S+)$", shown["value"]).groups()
    assert unit == expected_unit
    assert float(number) == pytest.approx(float(expected), abs=1e-6)
    assert answer.returncode == 0


def test_the_example_leaves_the_printed_table(answer, bench):
    _, _, _, table, _, rows = COMMAND.split()
    lines = (bench / table).read_text().splitlines()
    assert len(lines) == int(rows) + 1


def test_the_example_value_is_that_of_the_catenary():
    # closed form: y = k + c cosh((x - x0)/c) with span 3, height difference 0.4, length 4.2; times 6.5 N/m
    c = 1.0291354178112991
    assert 2 * c * sinh(1.5 / c) == pytest.approx(sqrt(4.2**2 - 0.4**2), rel=1e-12)
    x0 = 1.5 - c * asinh(0.4 / (2 * c * sinh(1.5 / c)))
    k = 2 - c * cosh(x0 / c)
    energy = 6.5 * sum(k * c * sinh(u) + c**2 * (sinh(2 * u) / 4 + u / 2) for u in ((3 - x0) / c, x0 / c))
    assert float(re.match(r"[\d.]+", entries(ANSWER)["value"])[0]) == pytest.approx(energy, abs=1e-6)


def test_the_example_is_the_sample():
    example, sample = json.loads(EXAMPLE), samples.load("hose")
    assert example["functional"] == sample["functional"]
    assert example["constraints"] == sample["constraints"]
    assert example["endpoints"] == sample["endpoints"]


@pytest.mark.parametrize("place", re.findall(r"`((?:service|tests|docker)/[^ `]*)`", README))
def test_what_it_points_to_exists(place):
    assert (ROOT / place).exists()


@pytest.mark.parametrize("command", re.findall(r"curvewright (\w+)`", README))
def test_its_commands_exist(command):
    assert command in main.commands


def test_its_test_command_can_be_run():
    assert os.access(ROOT / "tests/run", os.X_OK)
