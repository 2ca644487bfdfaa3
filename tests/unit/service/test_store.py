"""The store keeps what it accepted, changes a run only for its current attempt, and says clearly when it cannot."""

import threading
import time
from dataclasses import replace

import pytest
import sqlalchemy as sql
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory

from service import schema
from service.database import open_database
from service.run import (
    CursorError,
    Figures,
    IdempotencyError,
    QueueFullError,
    State,
    StoreError,
    StoreFullError,
    new_run,
)
from service.store import Store

FIGURES = Figures("local minimum", 1.25, 1e-9, "m", 0.5)


@pytest.fixture
def url(tmp_path):
    return f"sqlite:///{tmp_path / 'data' / 'runs.sqlite3'}"


@pytest.fixture
def store(url):
    store = Store(url)
    yield store
    store.close()


def accept(store, title="a", document="{}", **more):
    return store.accept(new_run(title, f"sha256:{title}", **more), document)


def claim(store, owner="me", most=1, lease=30.0):
    return list(store.claim(owner, most, lease))


def test_what_is_accepted_is_read_back_also_by_a_later_life(store, url):
    run = accept(store, "Fünf Größen", '{"title": "Fünf Größen"}', time_limit=12.5, priority=3)
    store.close()
    later = Store(url)
    assert later.get(run.id) == run
    assert later.document(run.id) == '{"title": "Fünf Größen"}'
    assert later.result(run.id) is None
    later.close()


def test_what_is_unknown_is_none(store):
    assert (store.get("x"), store.document("x"), store.result("x"), store.ask_cancel("x")) == (None,) * 4
    assert store.delete("x") is False


def test_addresses_cannot_be_guessed():
    ids = {new_run("", "").id for _ in range(1000)}
    assert len(ids) == 1000
    assert {len(id) for id in ids} == {26}
    letters = set("".join(ids))
    assert len(letters) ** 26 >= 2**128
    assert letters.isdisjoint("01ilo")


def test_the_database_keeps_every_commit_through_a_power_cut(store):
    with store._engine.connect() as connection:
        pragmas = {
            name: connection.exec_driver_sql(f"PRAGMA {name}").scalar()
            for name in ("journal_mode", "synchronous", "foreign_keys")
        }
    assert pragmas == {"journal_mode": "wal", "synchronous": 2, "foreign_keys": 1}


def test_the_data_directory_is_private(store, tmp_path):
    assert (tmp_path / "data").stat().st_mode & 0o777 == 0o700


# Idempotency


def test_a_repeated_key_gives_the_first_run(store):
    first = accept(store, key="k", key_hash="1")
    assert accept(store, key="k", key_hash="1") == first
    with pytest.raises(IdempotencyError, match=f"run {first.id} came with another body"):
        accept(store, key="k", key_hash="2")
    assert accept(store, key="other", key_hash="2") != first
    assert sum(store.counts().values()) == 2


def test_a_key_is_free_again_after_its_run_was_deleted(store):
    first = accept(store, key="k", key_hash="1")
    store.delete(first.id)
    assert accept(store, key="k", key_hash="2").id != first.id


# Claims


def test_claims_go_by_priority_then_age(store):
    for title, priority in [("old", 0), ("young", 0), ("urgent", 2)]:
        accept(store, title, priority=priority)
    assert [run.title for run in claim(store, most=2)] == ["urgent", "old"]
    assert [run.title for run in claim(store, most=2)] == ["young"]
    assert claim(store) == []


def test_many_claimers_share_the_runs_without_overlap(store, url):
    for number in range(60):
        accept(store, str(number))
    others = [Store(url) for _ in range(3)]
    taken = []

    def take(other, owner):
        while runs := claim(other, owner, most=2):
            taken.extend(runs)

    threads = [threading.Thread(target=take, args=(other, f"owner {n}")) for n, other in enumerate(others)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    for other in others:
        other.close()
    assert sorted(int(run.title) for run in taken) == list(range(60))
    assert {run.attempt for run in taken} == {1}


def test_a_lease_that_ran_out_is_open_to_others_only(store):
    accept(store)
    (first,) = claim(store, "me")
    assert claim(store, "you") == []
    store.renew("me", -1)
    assert claim(store, "me") == [], "its owner lives: it still works on it"
    (second,) = claim(store, "you")
    assert (second.id, second.attempt, second.owner) == (first.id, 2, "you")
    assert not store.finish(first, b"{}", FIGURES), "the late answer of the first attempt is dropped"
    assert store.finish(second, b"{}", FIGURES)


def test_a_renewed_lease_is_not_open(store):
    accept(store)
    claim(store, "me", lease=-1)
    assert list(store.renew("me", 30)) == []
    assert claim(store, "you") == []


def test_renewing_tells_which_runs_shall_stop(store):
    run, other = accept(store), accept(store)
    claim(store, "me", most=2)
    assert store.ask_cancel(run.id).cancel_asked
    assert list(store.renew("me", 30)) == [run.id]
    assert list(store.renew("you", 30)) == []
    assert store.get(other.id).cancel_asked is False


def test_taking_back_touches_only_ones_own(store):
    accept(store, "mine")
    claim(store, "me")
    accept(store, "yours")
    claim(store, "you")
    assert store.take_back("me") == 1
    assert [run.title for run in claim(store, "me", most=5)] == ["mine"]


def test_a_run_can_be_accepted_already_claimed(store):
    run = replace(new_run("a", "h"), state=State.SOLVING, attempt=1, owner="me", lease=time.time() + 30)
    assert store.accept(run, "{}") == run
    assert store.finish(run, b"{}", FIGURES)


# Ends


@pytest.mark.parametrize("size", [2, 100_000], ids=["small", "compressed"])
def test_a_result_comes_back_byte_by_byte(store, size):
    accept(store)
    (run,) = claim(store)
    result = b'"' + b"x" * size + b'"'
    assert store.finish(run, result, FIGURES)
    assert store.result(run.id) == result
    found = store.get(run.id)
    assert (found.state, found.verdict, found.value, found.value_error, found.value_unit, found.seconds) == (
        State.FINISHED, "local minimum", 1.25, 1e-9, "m", 0.5,
    )  # fmt: skip
    assert (found.owner, found.lease) == (None, None)
    assert found.updated >= run.updated


def ways_to_end(store):
    return [
        lambda run: store.finish(run, b"{}", FIGURES),
        lambda run: store.fail(run, "why"),
        lambda run: store.stop(run),
        lambda run: store.give_back(run),
    ]


@pytest.mark.parametrize("first", range(3))
def test_an_ended_run_ends_only_once(store, first):
    accept(store)
    (run,) = claim(store)
    ended = ways_to_end(store)[first](run)
    assert ended == store.get(run.id)
    assert [end(run) for end in ways_to_end(store)] == [None] * 4
    assert store.ask_cancel(run.id) == ended
    assert claim(store) == []


def test_a_waiting_run_cannot_be_ended_by_an_attempt(store):
    run = accept(store)
    assert [end(run) for end in ways_to_end(store)] == [None] * 4
    assert store.get(run.id) == run


def test_a_run_given_back_keeps_its_deaths_and_gets_a_new_attempt(store):
    accept(store)
    (run,) = claim(store)
    assert store.give_back(replace(run, deaths=1, reason="its worker died: signal 9 (SIGKILL)"))
    (again,) = claim(store)
    assert (again.attempt, again.deaths, again.reason) == (2, 1, "its worker died: signal 9 (SIGKILL)")
    assert not store.finish(run, b"{}", FIGURES)


def test_deleting_takes_document_and_result_along(store):
    accept(store)
    (run,) = claim(store)
    store.finish(run, b"{}", FIGURES)
    assert store.delete(run.id)
    with store._engine.connect() as connection:
        assert [connection.execute(sql.select(sql.func.count()).select_from(t)).scalar() for t in
                (schema.runs, schema.documents, schema.results)] == [0, 0, 0]  # fmt: skip


# Looking


def test_a_list_is_read_page_by_page_while_runs_come_and_go(store):
    runs = [accept(store, str(number)) for number in range(7)]
    first = store.list(limit=3)
    assert [run.title for run in first.runs] == ["6", "5", "4"]
    accept(store, "new")
    store.delete(runs[3].id)
    second = store.list(limit=3, after=first.after)
    assert [run.title for run in second.runs] == ["2", "1", "0"]
    assert second.after is None


def test_runs_of_the_same_moment_are_listed_once_each(store):
    now = time.time()
    for _ in range(5):
        store.accept(replace(new_run("a", "h"), created=now), "{}")
    seen, after = [], None
    while True:
        page = store.list(limit=2, after=after)
        seen += [run.id for run in page.runs]
        if (after := page.after) is None:
            break
    assert len(seen) == len(set(seen)) == 5


def test_a_list_can_be_of_one_state(store):
    accept(store, "first")
    accept(store, "second")
    claim(store)
    assert [run.title for run in store.list(state=State.SOLVING).runs] == ["first"]
    assert store.counts() == {**dict.fromkeys(State, 0), State.WAITING: 1, State.SOLVING: 1}


def test_a_list_can_be_of_one_verdict(store):
    accept(store, "first")
    accept(store, "second")
    (run,) = claim(store)
    store.finish(run, b"{}", FIGURES)
    assert [run.title for run in store.list(verdict="local minimum").runs] == ["first"]
    assert store.list(verdict="infeasible").runs == ()


@pytest.mark.parametrize(
    ("sought", "titles"),
    [
        ("hose", ["A HOSE of 4 m", "hose"]),
        ("100%", ["100% load"]),  # a sign that SQL would take for any text
        ("a_b", ["a_b"]),
        ("", ["axb", "a_b", "100% load", "A HOSE of 4 m", "hose"]),
        ("'; drop table runs; --", []),
    ],
)
def test_a_list_can_be_of_titles_with_a_text(store, sought, titles):
    for title in ("hose", "A HOSE of 4 m", "100% load", "a_b", "axb"):
        accept(store, title)
    assert [run.title for run in store.list(title=sought).runs] == titles


def test_a_list_of_some_is_read_page_by_page_too(store):
    for number in range(9):
        accept(store, f"{'hose' if number % 2 else 'chute'} {number}")
    first = store.list(limit=3, title="hose")
    second = store.list(limit=3, title="hose", after=first.after)
    assert [run.title for run in (*first.runs, *second.runs)] == ["hose 7", "hose 5", "hose 3", "hose 1"]
    assert second.after is None


@pytest.mark.parametrize("cursor", ["", "x", "e30", "W10", "WzEsIDJd!", "WyJhIiwgImIiXQ", "ÿ"])
def test_a_made_up_cursor_is_refused(store, cursor):
    with pytest.raises(CursorError, match="not a cursor of this list"):
        store.list(after=cursor)


def test_the_same_problem_is_found_again(store):
    accept(store, "same")
    (run,) = claim(store)
    assert store.find_by_hash("sha256:same") is None, "not finished yet"
    store.finish(run, b"{}", FIGURES)
    accept(store, "same")
    assert store.find_by_hash("sha256:same").id == run.id
    assert store.find_by_hash("sha256:other") is None


def test_a_finished_run_without_a_verdict_is_not_offered_again(store):
    accept(store, "same")
    (run,) = claim(store)
    store.finish(run, b"{}", Figures())
    assert store.find_by_hash("sha256:same") is None


# When it cannot


def test_a_full_queue_is_said(store):
    accept(store)
    with pytest.raises(QueueFullError, match="1 runs are waiting already"):
        store.accept(new_run("a", "h"), "{}", queue=1)


def end_the_disk(store):
    """As if the disk ended after the pages that there are: SQLite gives the same error."""

    @sql.event.listens_for(store._engine, "begin")
    def narrow(connection):
        connection.connection.dbapi_connection.execute("PRAGMA max_page_count = 1")


def test_a_full_disk_is_said_and_loses_nothing(store):
    kept = [accept(store, str(number)) for number in range(20)]
    end_the_disk(store)
    with pytest.raises(StoreFullError, match="database or disk is full"):
        accept(store, "large", "x" * 100_000)
    (run,) = claim(store)
    with pytest.raises(StoreFullError):
        store.finish(run, bytes(range(256)) * 1000 + b"".join(n.to_bytes(3, "big") for n in range(50_000)), FIGURES)
    assert store.get(run.id) == run, "the whole change is undone"
    assert {run.id for run in store.list().runs} == {run.id for run in kept}
    assert store.list(limit=1).runs[0].title == "19"


def test_a_store_where_nothing_more_fits_is_not_writable(store):
    assert store.writable()
    end_the_disk(store)
    for number in range(2000):
        try:
            accept(store, str(number))
        except StoreFullError:
            break
    assert not store.writable()
    assert store.counts()[State.WAITING] == number


def test_a_broken_database_is_an_error_of_the_store(tmp_path):
    (tmp_path / "broken").write_bytes(b"this is no database" * 1000)
    with pytest.raises(StoreError, match="file is not a database"):
        Store(f"sqlite:///{tmp_path / 'broken'}")


def test_a_directory_that_cannot_be_made_is_an_error_of_the_store(tmp_path):
    (tmp_path / "file").touch()
    with pytest.raises(StoreError, match="cannot be made: Not a directory"):
        Store(f"sqlite:///{tmp_path / 'file' / 'data' / 'runs.sqlite3'}")


# Schema


def test_the_migrations_lead_to_the_tables_of_the_code(url):
    Store(url).close()  # makes the directory
    engine = open_database(url.replace("runs.", "migrated."))
    with engine.begin() as connection:
        schema.migrate(connection)
        assert compare_metadata(MigrationContext.configure(connection), schema.METADATA) == []
        made = {
            sql_text
            for (sql_text,) in connection.exec_driver_sql(
                "SELECT sql FROM sqlite_schema WHERE name != 'alembic_version'"
            )
        }
        fresh = sql.create_engine("sqlite://")
        schema.METADATA.create_all(fresh)
        with fresh.connect() as other:
            meant = {sql_text for (sql_text,) in other.exec_driver_sql("SELECT sql FROM sqlite_schema")}
        fresh.dispose()
    engine.dispose()
    assert {_words(text) for text in made if text} - {_words(text) for text in meant if text} == set()
    assert {_words(text) for text in meant if text} - {_words(text) for text in made if text} == set()


def _words(text):
    return " ".join(text.split())


def test_new_tables_are_known_to_the_migrations(store):
    with store._engine.begin() as connection:
        tables = connection.exec_driver_sql("SELECT sql FROM sqlite_schema").all()
        assert MigrationContext.configure(connection).get_current_heads() == (schema.HEAD,)
        schema.migrate(connection)
        assert connection.exec_driver_sql("SELECT sql FROM sqlite_schema").all() == tables


def test_the_stated_revision_is_the_last_one():
    assert ScriptDirectory(str(schema._MIGRATIONS)).get_heads() == [schema.HEAD]


def test_servers_that_start_at_once_make_the_tables_once(url):
    stores, errors = [], []

    def open_one():
        try:
            stores.append(Store(url))
        except Exception as error:
            errors.append(error)

    Store(url.replace("runs.", "warm-up.")).close()  # makes the directory
    threads = [threading.Thread(target=open_one) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    for store in stores:
        store.close()
    assert errors == []
    assert len(stores) == 4


@pytest.mark.parametrize(
    "change",
    ["state = 'lost'", "state = 'solving'", "owner = 'me'", "cancel_asked = 2", "attempt = 'three'"],
)
def test_the_database_itself_refuses_nonsense(store, change):
    accept(store)
    with pytest.raises(sql.exc.IntegrityError), store._engine.begin() as connection:
        connection.exec_driver_sql(f"UPDATE runs SET {change}")
