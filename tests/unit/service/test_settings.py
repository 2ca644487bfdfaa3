"""Settings come from the environment, single values from the caller; nonsense is refused by name."""

from pathlib import Path

import pytest
from pydantic import ValidationError

from service.settings import Settings


@pytest.fixture(autouse=True)
def _nothing_set(monkeypatch):
    for name in Settings.model_fields:
        monkeypatch.delenv(f"CURVEWRIGHT_{name.upper()}", raising=False)


def test_the_defaults_serve_this_machine_only(monkeypatch, tmp_path):
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path))
    settings = Settings()
    assert (settings.host, settings.loopback, settings.open) == ("127.0.0.1", True, False)
    assert settings.data == tmp_path / "curvewright"
    assert settings.database_url == f"sqlite:///{tmp_path}/curvewright/curvewright.sqlite3"
    assert settings.workers >= 1


def test_the_environment_and_the_caller_decide(monkeypatch):
    monkeypatch.setenv("CURVEWRIGHT_PORT", "1234")
    monkeypatch.setenv("CURVEWRIGHT_DATABASE", "postgresql+psycopg://x/y")
    assert Settings().port == 1234
    assert Settings(port=0, data=Path("relative")).port == 0
    assert Settings().database_url == "postgresql+psycopg://x/y"


def test_a_relative_directory_means_the_current_one(monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    assert Settings(data=Path("here")).database_url == f"sqlite:///{tmp_path}/here/curvewright.sqlite3"


def test_the_environment_is_text_and_is_read_as_what_is_meant(monkeypatch):
    for name, text in {"OPEN": "true", "WAIT_SECONDS": "2.5", "DATA": "/somewhere", "HOSTS": ""}.items():
        monkeypatch.setenv(f"CURVEWRIGHT_{name}", text)
    settings = Settings()
    assert (settings.open, settings.wait_seconds, settings.data, settings.hosts) == (True, 2.5, Path("/somewhere"), "")
    monkeypatch.setenv("CURVEWRIGHT_PORT", "no number")
    with pytest.raises(ValidationError, match="port"):
        Settings()


def test_a_setting_that_is_none_is_refused_where_it_is_given():
    with pytest.raises(ValidationError, match="colour"):
        Settings(colour="green")


@pytest.mark.parametrize(("name", "value"), [("port", 70000), ("workers", 0), ("memory_mb", 1), ("attempts", 0)])
def test_nonsense_is_refused(name, value):
    with pytest.raises(ValidationError, match=name):
        Settings(**{name: value})


def test_settings_are_never_changed():
    with pytest.raises(ValidationError, match="frozen"):
        Settings().port = 1
