"""The sample problems: JSON documents beside this module, in the order in which pages show them."""

from __future__ import annotations

import json
from importlib.resources import files
from typing import Any

ABOUT: dict[str, str] = {
    "crucible": "A gantry carries a hanging crucible 3 m without residual swing, in least time.",
    "chute": "The profile of a pellet chute of quickest descent.",
    "chute-over-duct": "The same chute, kept clear of a round duct.",
    "scan-stage": "40 mm in least time under limits on speed, acceleration and jerk.",
    "scan-stage-way-points": "The smoothest motion through two timed way points.",
    "ramp": "A furnace ramp of least energy under a thermal stress limit.",
    "cooling": "How fast a crucible cools, fitted to thirteen readings.",
    "hose": "The hanging shape of a hose of given length.",
    "hose-over-bench": "The same hose, held up by a bench.",
    "hose-lengths": "The hose again, in nineteen lengths: a sweep.",
    "lens-rod": "The path of a light ray through a rod whose refractive index is a measured table.",
    "conduit": "The shortest conduit on a cylindrical tank around a hatch.",
    "sleeve": "The film of least area between two unequal hoops.",
    "sleeve-limit": "The hoop distance at which that film lets go.",
    "sleeve-branch": "Both films between equal hoops, followed in their distance to where they meet and let go.",
    "strip": "The shape of a bent elastic strip of given length between two clamps.",
    "sample-rocket": "The greatest height of a small sounding vehicle with drag.",
    "staged-rocket": "A vehicle that drops its booster: when to light the second stage for the greatest height.",
    "fin": "The profile of a cooling fin of given mass with the greatest heat flow.",
}
"""Name and one line for each sample, in order."""


def names() -> tuple[str, ...]:
    """The names of all samples, in the order in which pages show them."""
    return tuple(ABOUT)


def text(name: str) -> str:
    """The document of a sample as it is written, to be shown and edited; KeyError where there is none."""
    if name not in ABOUT:
        raise KeyError(name)
    return (files(__name__) / f"{name}.json").read_text(encoding="utf-8")


def load(name: str) -> dict[str, Any]:
    """The document of a sample; KeyError where there is none."""
    document: dict[str, Any] = json.loads(text(name))
    return document
