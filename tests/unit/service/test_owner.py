"""A server keeps its name and its directory to itself."""

import pytest

from service.owner import DirectoryInUseError, Owner


def test_the_name_survives_restarts_and_differs_between_directories(tmp_path):
    first = Owner(tmp_path / "a")
    first.release()
    again, other = Owner(tmp_path / "a"), Owner(tmp_path / "b")
    assert again.name == first.name != other.name
    again.release()
    other.release()


def test_a_directory_has_one_server(tmp_path):
    owner = Owner(tmp_path)
    with pytest.raises(DirectoryInUseError, match=f"another server works in {tmp_path}"):
        Owner(tmp_path)
    owner.release()
    Owner(tmp_path).release()
