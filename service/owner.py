"""Who this server is: a name that survives restarts, and a lock that keeps a second server off the same directory."""

from __future__ import annotations

import fcntl
import os
import secrets
from pathlib import Path

from service.run import StoreError


class DirectoryInUseError(StoreError):
    """Another server works in the data directory."""


class Owner:
    """Holds the data directory until `release`.  Raises DirectoryInUseError."""

    def __init__(self, directory: Path) -> None:
        directory.mkdir(mode=0o700, parents=True, exist_ok=True)
        self._file = os.open(directory / "owner", os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
        try:
            fcntl.flock(self._file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            os.close(self._file)
            raise DirectoryInUseError(f"another server works in {directory}: give this one its own directory") from None
        self.name = os.read(self._file, 100).decode()
        if not self.name:
            self.name = secrets.token_hex(8)
            os.write(self._file, self.name.encode())

    def release(self) -> None:
        """Let another server in."""
        os.close(self._file)
