"""The developers' guide names what exists, and every setting."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from service.settings import Settings

ROOT = Path(__file__).parents[2]
GUIDE = (ROOT / "DEVELOPERS.md").read_text()
PLACES = sorted(set(re.findall(r"`((?:service|solvers|web|tests|docker|\.ci)/[\w./-]*)`", GUIDE)))


def test_it_names_places():
    assert len(PLACES) > 20


@pytest.mark.parametrize("place", PLACES)
def test_what_it_names_exists(place):
    assert (ROOT / place).exists()


@pytest.mark.parametrize("name", Settings.model_fields)
def test_every_setting_is_named(name):
    assert f"`CURVEWRIGHT_{name.upper()}`" in GUIDE
