"""The store speaks in records: no SQL leaves this module, and no row enters it.

`Store(url)` brings the database to the current schema.  What is accepted is on disk when `accept` returns.

    accept(run, document)   get(id)  document(id)  result(id)  list(...)  find_by_hash(hash)
    claim(owner, most, lease)  renew(owner, lease)  take_back(owner)   finish / fail / stop / give_back(run, ...)
    ask_cancel(id)  delete(id)  counts()  writable()  close()

A state changes only by compare-and-set on (id, attempt): the answer of an attempt that is no longer the current one
changes nothing.
"""

from __future__ import annotations

import base64
import binascii
import json
import threading
import time
import zlib
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager, nullcontext
from dataclasses import fields
from typing import Any

import sqlalchemy as sql
from sqlalchemy.engine import Connection

from service.database import bare_cursor, open_database, text_of, translated
from service.run import (
    CursorError,
    Figures,
    IdempotencyError,
    Page,
    QueueFullError,
    Run,
    State,
    StoreError,
)
from service.schema import documents, results, runs, upgrade

_COMPRESS_FROM = 64 * 1024  # bytes; whoever waits for an answer waits for its compression too
_NAMES = tuple(field.name for field in fields(Run))
_COLUMNS = [runs.c[name] for name in _NAMES]
_FIGURES = tuple(field.name for field in fields(Figures))

# Built once: building a statement takes longer than SQLite needs for it.
_INSERT_RUN = runs.insert()
_INSERT_DOCUMENT = documents.insert()
_INSERT_RESULT = results.insert()
_SELECT = sql.select(*_COLUMNS)
_BY_ID = _SELECT.where(runs.c.id == sql.bindparam("sought"))
_BY_KEY = _SELECT.where(runs.c.key == sql.bindparam("sought"))
_DOCUMENT = sql.select(documents.c.document).where(documents.c.run_id == sql.bindparam("sought"))
_RESULT = sql.select(results.c.document, results.c.compressed).where(results.c.run_id == sql.bindparam("sought"))
_MOVE = (
    runs.update()
    .where(
        runs.c.id == sql.bindparam("sought"),
        runs.c.attempt == sql.bindparam("tried"),
        runs.c.state == sql.bindparam("before"),
    )
    .returning(*_COLUMNS)
)
_MOVED = ("state", "updated", "owner", "lease")
_WAITING = sql.select(sql.func.count()).where(runs.c.state == State.WAITING.value)


class Store:
    """The database behind the service.  Every method may be called from any thread."""

    def __init__(self, url: str) -> None:
        self._sqlite = url.startswith("sqlite")
        self._engine = open_database(url)
        self._reader = self._engine.execution_options(reads_only=True)
        # SQLite has one writer: within a process a lock is fairer and faster than its busy waiting.
        self._turn = threading.Lock() if self._sqlite else nullcontext()
        with translated():
            upgrade(self._engine)
        self._finish = text_of(self._engine, _MOVE, *_MOVED, *_FIGURES)
        self._insert_result = text_of(self._engine, _INSERT_RESULT)

    def close(self) -> None:
        """Give the connections back."""
        self._engine.dispose()

    # Accepting

    def accept(self, run: Run, document: str, *, queue: int | None = None) -> Run:
        """Keep a new run for good; return it, or the earlier run with the same key and body.

        `run` may be claimed already (state solving, attempt 1, owner and lease): that saves a commit where a slot is
        free.  `queue`: most runs that may wait.  Raises IdempotencyError, QueueFullError, StoreError.
        """
        try:
            with self._write() as connection:
                if run.key is not None and (earlier := _one(connection, _BY_KEY, run.key)):
                    return _same_body(earlier, run)
                if queue is not None and run.state is State.WAITING:
                    _refuse_when_full(connection, queue)
                connection.execute(_INSERT_RUN, _row(run))
                connection.execute(_INSERT_DOCUMENT, {"run_id": run.id, "document": document})
        except sql.exc.IntegrityError:
            # The key came in through another server between the look and the insert.
            if run.key is not None and (winner := self._get(_BY_KEY, run.key)):
                return _same_body(winner, run)
            raise
        return run

    # Reading

    def get(self, id: str) -> Run | None:
        """The run, or None."""
        return self._get(_BY_ID, id)

    def document(self, id: str) -> str | None:
        """The problem document of a run, as it was accepted."""
        with self._read() as connection:
            text: str | None = connection.execute(_DOCUMENT, {"sought": id}).scalar_one_or_none()
        return text

    def result(self, id: str) -> bytes | None:
        """The result document of a run as JSON text in UTF-8, or None."""
        with self._read() as connection:
            row = connection.execute(_RESULT, {"sought": id}).one_or_none()
        if row is None:
            return None
        return zlib.decompress(row.document) if row.compressed else bytes(row.document)

    def list(
        self,
        *,
        limit: int = 50,
        after: str | None = None,
        state: State | None = None,
        verdict: str | None = None,
        title: str = "",
    ) -> Page:
        """Runs, the newest first, from the place where `after` points.  Raises CursorError.

        Only those in a state, with a verdict, with a text in their title (A to Z are the same in either case).
        """
        query = _SELECT.order_by(runs.c.created.desc(), runs.c.id.desc()).limit(limit + 1)
        if after is not None:
            query = query.where(sql.tuple_(runs.c.created, runs.c.id) < sql.tuple_(*_read_cursor(after)))
        if state is not None:
            query = query.where(runs.c.state == state.value)
        if verdict is not None:
            query = query.where(runs.c.verdict == verdict)
        if title:
            query = query.where(runs.c.title.icontains(title, autoescape=True))
        with self._read() as connection:
            found = [_run(row) for row in connection.execute(query)]
        page = tuple(found[:limit])
        return Page(page, _cursor(page[-1]) if len(found) > limit else None)

    def find_by_hash(self, document_hash: str) -> Run | None:
        """The newest finished run with a verdict on the same problem, or None."""
        query = (
            _SELECT.where(runs.c.document_hash == document_hash, runs.c.state == State.FINISHED.value)
            .where(runs.c.verdict.is_not(None))
            .order_by(runs.c.created.desc())
            .limit(1)
        )
        with self._read() as connection:
            row = connection.execute(query).one_or_none()
        return None if row is None else _run(row)

    def counts(self) -> Mapping[State, int]:
        """How many runs there are in each state."""
        query = sql.select(runs.c.state, sql.func.count()).group_by(runs.c.state)
        with self._read() as connection:
            found = {State(state): int(count) for state, count in connection.execute(query)}
        return {state: found.get(state, 0) for state in State}

    def writable(self) -> bool:
        """True where a change can be committed now."""
        try:
            with self._write() as connection:
                # Nothing remains, but pages are written: a full disk or a lost mount shows.
                connection.execute(_INSERT_RUN, _row(Run("", "", "", 0.0, 0.0)))
                connection.execute(runs.delete().where(runs.c.id == ""))
        except StoreError:
            return False
        return True

    # Solving

    def claim(self, owner: str, most: int, lease_seconds: float) -> Sequence[Run]:
        """Take up to `most` runs that wait, or whose owner let the lease run out, by priority, then age."""
        now = time.time()
        free = (runs.c.state == State.WAITING.value) | (
            (runs.c.state == State.SOLVING.value) & (runs.c.lease < now) & (runs.c.owner != owner)
        )
        chosen = sql.select(runs.c.id).where(free).order_by(runs.c.priority.desc(), runs.c.created).limit(most)
        if not self._sqlite:
            chosen = chosen.with_for_update(skip_locked=True)
        change = (
            runs.update()
            .where(runs.c.id.in_(chosen.scalar_subquery()))
            .values(
                {
                    "state": State.SOLVING.value,
                    "attempt": runs.c.attempt + 1,
                    "owner": owner,
                    "lease": now + lease_seconds,
                    "updated": now,
                }
            )
            .returning(*_COLUMNS)
        )
        with self._write() as connection:
            taken = [_run(row) for row in connection.execute(change)]
        return sorted(taken, key=lambda run: (-run.priority, run.created))

    def renew(self, owner: str, lease_seconds: float) -> Sequence[str]:
        """Prolong all leases of `owner`; return the runs among them that somebody wants stopped."""
        mine = (runs.c.owner == owner) & (runs.c.state == State.SOLVING.value)
        with self._write() as connection:
            connection.execute(runs.update().where(mine).values({"lease": time.time() + lease_seconds}))
            found = connection.execute(sql.select(runs.c.id).where(mine, runs.c.cancel_asked == 1))
            return [str(id) for id in found.scalars()]

    def finish(self, run: Run, result: bytes, figures: Figures, *, stopped: bool = False) -> Run | None:
        """Keep the result (JSON text in UTF-8); `stopped` where the run was cancelled.

        Returns the run as it is then, as all four do that end an attempt; None where this is not its attempt any more.
        """
        large = len(result) >= _COMPRESS_FROM
        state = State.STOPPED if stopped else State.FINISHED
        content = zlib.compress(result, 1) if large else result
        change = _change(run, state, {name: getattr(figures, name) for name in _FIGURES})
        with translated(), self._turn, bare_cursor(self._engine) as cursor:
            row = cursor.execute(self._finish, change).fetchone()
            if row is not None:
                kept = {"run_id": run.id, "compressed": int(large), "document": content}
                cursor.execute(self._insert_result, kept)
        return None if row is None else _run(row)

    def fail(self, run: Run, reason: str, *, seconds: float | None = None) -> Run | None:
        """End a run without a result; `run.deaths` is kept."""
        values = {"reason": reason, "deaths": run.deaths, "seconds": seconds}
        with self._write() as connection:
            return _move(connection, run, State.FAILED, values)

    def stop(self, run: Run, *, seconds: float | None = None) -> Run | None:
        """End a cancelled run that left no result."""
        values = {"reason": "stopped on request", "seconds": seconds}
        with self._write() as connection:
            return _move(connection, run, State.STOPPED, values)

    def give_back(self, run: Run) -> Run | None:
        """Let a run wait again, with its `deaths` and `reason` so far."""
        values = {"deaths": run.deaths, "reason": run.reason}
        with self._write() as connection:
            return _move(connection, run, State.WAITING, values)

    def take_back(self, owner: str) -> int:
        """At start: let runs wait again that an earlier life of this server left.  Returns how many."""
        change = (
            runs.update()
            .where(runs.c.owner == owner, runs.c.state == State.SOLVING.value)
            .values({"state": State.WAITING.value, "owner": None, "lease": None, "updated": time.time()})
        )
        with self._write() as connection:
            return connection.execute(change).rowcount

    # Ending from outside

    def ask_cancel(self, id: str) -> Run | None:
        """Stop a waiting run at once, mark one that is being solved; return it as it is then, None where unknown."""
        now = time.time()
        waiting = (
            runs.update()
            .where(runs.c.id == id, runs.c.state == State.WAITING.value)
            .values({"state": State.STOPPED.value, "cancel_asked": 1, "reason": "stopped on request", "updated": now})
        )
        solving = (
            runs.update()
            .where(runs.c.id == id, runs.c.state == State.SOLVING.value)
            .values({"cancel_asked": 1, "updated": now})
        )
        with self._write() as connection:
            if not connection.execute(waiting).rowcount:
                connection.execute(solving)
            return _one(connection, _BY_ID, id)

    def delete(self, id: str) -> bool:
        """Forget a run with its document and result, whatever its state.  False where unknown."""
        with self._write() as connection:
            return connection.execute(runs.delete().where(runs.c.id == id)).rowcount > 0

    # Connections

    def _get(self, query: sql.Select[Any], sought: str) -> Run | None:
        with self._read() as connection:
            return _one(connection, query, sought)

    @contextmanager
    def _read(self) -> Iterator[Connection]:
        with translated(), self._reader.connect() as connection:
            yield connection

    @contextmanager
    def _write(self) -> Iterator[Connection]:
        """A transaction that is on disk when the block is left."""
        with translated(), self._turn, self._engine.begin() as connection:
            yield connection


def _change(run: Run, state: State, values: Mapping[str, Any]) -> dict[str, Any]:
    """The parameters of `_MOVE`."""
    moved = {"state": state.value, "updated": time.time(), "owner": None, "lease": None}
    return {"sought": run.id, "tried": run.attempt, "before": State.SOLVING.value, **moved, **values}


def _move(connection: Connection, run: Run, state: State, values: Mapping[str, Any]) -> Run | None:
    """Change the state of a run that is being solved in this attempt."""
    row = connection.execute(_MOVE, _change(run, state, values)).one_or_none()
    return None if row is None else _run(row)


def _one(connection: Connection, query: sql.Select[Any], sought: str) -> Run | None:
    row = connection.execute(query, {"sought": sought}).one_or_none()
    return None if row is None else _run(row)


def _refuse_when_full(connection: Connection, queue: int) -> None:
    if connection.execute(_WAITING).scalar_one() >= queue:
        raise QueueFullError(f"{queue} runs are waiting already")


def _same_body(earlier: Run, run: Run) -> Run:
    if earlier.key_hash != run.key_hash:
        raise IdempotencyError(f"the key of run {earlier.id} came with another body")
    return earlier


def _row(run: Run) -> dict[str, Any]:
    row = {name: getattr(run, name) for name in _NAMES}
    return row | {"state": run.state.value, "cancel_asked": int(run.cancel_asked)}


def _run(row: Sequence[Any]) -> Run:
    """The run of a row of `_COLUMNS`."""
    values = dict(zip(_NAMES, row, strict=True))
    return Run(**values | {"state": State(values["state"]), "cancel_asked": bool(values["cancel_asked"])})


def _cursor(run: Run) -> str:
    return base64.urlsafe_b64encode(json.dumps([run.created, run.id]).encode()).decode().rstrip("=")


def _read_cursor(text: str) -> tuple[float, str]:
    try:
        created, id = json.loads(base64.b64decode(text + "=" * (-len(text) % 4), b"-_", validate=True))
        return float(created), str(id)
    except (ValueError, TypeError, binascii.Error) as error:
        raise CursorError("not a cursor of this list") from error
