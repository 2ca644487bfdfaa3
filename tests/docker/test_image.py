"""The image and the compose file hold to what they promise; no container engine is needed to see that."""

from __future__ import annotations

import json
import re
import shlex
from pathlib import Path

import pytest
import yaml

from service.settings import Settings

DOCKER = Path(__file__).parents[2] / "docker"


def instructions(text: str) -> list[tuple[str, str]]:
    """Instruction and arguments, with continued lines joined and comments left out."""
    joined = re.sub(r"\\\n\s*", "", re.sub(r"^\s*#.*\n", "", text, flags=re.M))
    return [tuple(line.split(maxsplit=1)) for line in joined.splitlines() if line.strip()]


@pytest.fixture(scope="module")
def stages() -> list[list[tuple[str, str]]]:
    found: list[list[tuple[str, str]]] = []
    for word, rest in instructions((DOCKER / "Dockerfile").read_text()):
        if word == "FROM":
            found.append([])
        found[-1].append((word, rest))
    return found


@pytest.fixture(scope="module")
def box() -> dict:
    return yaml.safe_load((DOCKER / "compose.yaml").read_text())


def given(stage: list[tuple[str, str]], word: str) -> list[str]:
    return [rest for name, rest in stage if name == word]


def test_only_known_instructions_are_used(stages):
    known = {"FROM", "WORKDIR", "COPY", "ENV", "RUN", "USER", "VOLUME", "EXPOSE", "HEALTHCHECK", "ENTRYPOINT", "CMD"}
    assert {word for stage in stages for word, _ in stage} <= known


def test_both_stages_start_from_the_same_exact_version(stages):
    bases = {given(stage, "FROM")[0].split()[0] for stage in stages}
    assert len(stages) == 2
    assert len(bases) == 1
    assert re.fullmatch(r"python:3\.11\.\d+-slim-bookworm", bases.pop())


def test_the_result_installs_wheels_only(stages):
    (run,) = given(stages[1], "RUN")
    assert "--no-index" in run
    assert not given(stages[1], "COPY")


def test_it_does_not_run_as_root(stages):
    words = [word for word, _ in stages[1]]
    assert given(stages[1], "USER") == ["curvewright"]
    assert words.index("USER") > words.index("RUN")


@pytest.mark.parametrize("word", ["ENTRYPOINT", "CMD"])
def test_start_is_in_exec_form(stages, word):
    (rest,) = given(stages[1], word)
    assert all(isinstance(part, str) for part in json.loads(rest))


def test_the_health_check_is_a_command_of_ours(stages):
    from service.cli import main

    (check,) = given(stages[1], "HEALTHCHECK")
    program, command = json.loads(check.partition(" CMD ")[2])
    assert program == "curvewright"
    assert command in main.commands


def test_only_settings_are_set(stages, box):
    known = {f"CURVEWRIGHT_{name.upper()}" for name in Settings.model_fields}
    image = [pair.split("=")[0] for rest in given(stages[1], "ENV") for pair in shlex.split(rest)]
    example = re.findall(r"^(\w+)=", (DOCKER / ".env.example").read_text(), flags=re.M)
    assert {name for name in image if name.startswith("CURVEWRIGHT_")} <= known
    assert example
    assert set(example) <= known


def test_the_box_is_confined(box):
    (service,) = box["services"].values()
    assert service["read_only"] is True
    assert service["cap_drop"] == ["ALL"]
    assert service["security_opt"] == ["no-new-privileges:true"]
    assert service["cpus"] > 0
    assert service["mem_limit"]
    assert all(port.startswith("127.0.0.1:") for port in service["ports"])


def test_the_data_outlive_the_container(stages, box):
    (service,) = box["services"].values()
    name, target = service["volumes"][0].split(":")
    assert name in box["volumes"]
    assert target == given(stages[1], "VOLUME")[0]


def test_constraints_are_exact_and_cover_every_dependency():
    import tomllib

    lines = (DOCKER / "constraints.txt").read_text().split()
    assert all(re.fullmatch(r"[A-Za-z0-9._-]+==[A-Za-z0-9.+!]+", line) for line in lines)
    pinned = {canonical(line.partition("==")[0]) for line in lines}
    project = tomllib.loads((DOCKER.parent / "pyproject.toml").read_text())["project"]
    wanted = [*project["dependencies"], *project["optional-dependencies"]["dev"]]
    assert {canonical(re.match(r"[A-Za-z0-9._-]+", line)[0]) for line in wanted} <= pinned


def canonical(name: str) -> str:
    """A package's name as the registries compare it."""
    return re.sub(r"[-_.]+", "-", name).lower()


def test_the_ignore_list_lets_in_what_the_image_copies(stages):
    allowed = {line[1:] for line in (DOCKER.parent / ".dockerignore").read_text().split() if line.startswith("!")}
    copied = {source for rest in given(stages[0], "COPY") for source in rest.split()[:-1]}
    assert copied == allowed
