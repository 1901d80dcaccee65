"""Submissions, claims and fences, on SQLite and on PostgreSQL."""

from __future__ import annotations

import threading
from collections import Counter
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager

import pytest
import sqlalchemy as sa

from ladderband.jobs import claims, records
from ladderband.jobs.claims import Ticket
from ladderband.jobs.database import Database, StorageUnavailable
from ladderband.jobs.errors import JobFinished, JobNotFound, QueueFull, TokenMismatch
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.submissions import (
    JobView,
    NewJob,
    cancel,
    canonical,
    expire,
    listed,
    request_digest,
    request_of,
    submit,
    view,
)


def new(number: int = 0, **changes: object) -> NewJob:
    request = canonical({"number": number})
    values: dict[str, object] = {
        "kind": SWEEPS if changes.get("total", 1) != 1 else "sleep",
        "request": request,
        "digest": request_digest("sleep", request, "1"),
    }
    return NewJob(**{**values, **changes})  # type: ignore[arg-type]


def put(database: Database, *args: int, **changes: object) -> JobView:
    return submit(database, new(*args, **changes), open_limit=1000)[0]


def take(database: Database, owner: str = "e1", lease_s: float = 30.0) -> Ticket:
    ticket = claims.claim(database, owner, lease_s)
    assert ticket is not None
    return ticket


def shards(database: Database, job_id: str) -> list[sa.Row[*tuple[object, ...]]]:
    with database.reading() as connection:
        query = sa.select(records.shard).where(records.shard.c.job_id == job_id)
        return list(connection.execute(query.order_by(records.shard.c.id)).all())


# ---------------------------------------------------------------- submissions


def test_the_same_request_twice_is_one_job(database: Database) -> None:
    first, first_new = submit(database, new(1), 10)
    second, second_new = submit(database, new(1), 10)
    assert (first.id, first_new, second_new) == (second.id, True, False)


def test_many_clients_submitting_the_same_requests_make_each_once(database: Database) -> None:
    def client(_: int) -> list[tuple[str, bool]]:
        return [
            (found.id, made) for found, made in (submit(database, new(n), 100) for n in range(20))
        ]

    with ThreadPoolExecutor(8) as pool:
        answers = [answer for answers in pool.map(client, range(8)) for answer in answers]
    assert len({ident for ident, _ in answers}) == 20
    assert sum(made for _, made in answers) == 20


def test_a_token_leads_to_its_job_and_refuses_another_request(database: Database) -> None:
    first = put(database, 1, token="a")
    assert put(database, 1, token="a").id == first.id
    assert put(database, 1, token="b").id == first.id
    with pytest.raises(TokenMismatch, match="different request"):
        put(database, 2, token="a")


def test_a_cancelled_job_runs_again_unless_its_token_asks(database: Database) -> None:
    first = put(database, 1, token="a")
    cancel(database, first.id)
    assert put(database, 1, token="a").state == "cancelled"
    again = put(database, 1)
    assert again.id != first.id
    assert again.state == "queued"


def test_a_job_belongs_to_its_key(database: Database) -> None:
    mine = put(database, 1, key_id="me")
    theirs = put(database, 1, key_id="them")
    assert mine.id != theirs.id
    assert [found.id for found in listed(database, "me", limit=10)] == [mine.id]
    for act in (view, cancel):
        with pytest.raises(JobNotFound):
            act(database, mine.id, "them")


def test_listing_pages_and_filters(database: Database) -> None:
    made = [put(database, number) for number in range(5)]
    cancel(database, made[0].id)
    first = listed(database, "", limit=2)
    assert [found.id for found in first] == [made[4].id, made[3].id]
    second = listed(database, "", limit=2, before=first[-1].created)
    assert [found.id for found in second] == [made[2].id, made[1].id]
    assert [found.id for found in listed(database, "", limit=9, states=["cancelled"])] == [
        made[0].id
    ]


def test_the_queue_of_a_key_is_bounded(database: Database) -> None:
    for number in range(3):
        submit(database, new(number), 3)
    with pytest.raises(QueueFull, match="3 unfinished"):
        submit(database, new(9), 3)
    assert len(listed(database, "", limit=10)) == 3
    submit(database, new(9, key_id="other"), 3)


def test_waiting_for_a_batch_job_moves_it_to_the_front(database: Database) -> None:
    put(database, 1)
    second = put(database, 2)
    assert put(database, 2, lane=records.INTERACTIVE).id == second.id
    assert take(database).job_id == second.id


# ---------------------------------------------------------------- claims


def test_a_single_request_runs_to_its_result(database: Database) -> None:
    made = put(database)
    ticket = take(database)
    assert (ticket.job_id, ticket.start, ticket.stop, ticket.attempt) == (made.id, 0, 1, 1)
    assert view(database, made.id).state == "running"
    assert claims.claim(database, "e2", 30) is None
    assert claims.finish(database, ticket, [b"one", b"two"], 0.1)
    ended = view(database, made.id)
    assert (ended.state, ended.done, ended.has_result) == ("succeeded", 1, True)
    assert list(claims.parts_of(database, made.id)) == [b"one", b"two"]
    assert put(database).id == made.id


def test_a_sweep_is_carved_into_shards_and_merged(database: Database) -> None:
    made = put(database, total=100, point_s=0.01)
    tickets = []
    while (ticket := claims.claim(database, "e", 30)) is not None:
        tickets.append(ticket)
        assert ticket.role == "points"
        assert view(database, made.id).state == "running"
        claims.finish(database, ticket, [b"%d" % ticket.start], 0.01 * (ticket.stop - ticket.start))
        if ticket.stop == 100:
            break
    covered = [point for t in tickets for point in range(t.start, t.stop)]
    assert covered == list(range(100))
    assert tickets[0].stop == 30
    assert list(claims.parts_of(database, made.id)) == [b"%d" % t.start for t in tickets]
    merge = take(database)
    assert merge.role == "merge"
    assert claims.finish(database, merge, [b"table"], 0.1)
    assert view(database, made.id).state == "succeeded"
    assert list(claims.parts_of(database, made.id)) == [b"table"]


def test_shards_take_the_size_the_measured_time_asks_for(database: Database) -> None:
    put(database, total=10_000, point_s=0.3)
    first = take(database)
    assert first.stop - first.start == 1
    claims.finish(database, first, [], 0.003)
    second = take(database)
    assert second.stop - second.start == 100


def test_a_stale_ticket_changes_nothing(database: Database) -> None:
    made = put(database)
    stale = take(database, "paused", lease_s=-1.0)
    assert claims.reap(database) == 1
    fresh = take(database, "other")
    assert fresh.attempt == stale.attempt + 1
    assert not claims.finish(database, stale, [b"old"], 0.1)
    assert not claims.fail(database, stale, {"type": "x"})
    assert not claims.give_back(database, stale, crashed=True)
    assert claims.renew(database, [stale, fresh], 30) == {fresh.fence}
    assert view(database, made.id).state == "running"
    assert claims.finish(database, fresh, [b"new"], 0.1)
    assert not claims.finish(database, fresh, [b"again"], 0.1)
    assert list(claims.parts_of(database, made.id)) == [b"new"]
    assert view(database, made.id).done == 1


def test_a_renewed_lease_is_not_reaped(database: Database) -> None:
    put(database)
    ticket = take(database, lease_s=-1.0)
    assert claims.renew(database, [ticket], 30) == {ticket.fence}
    assert claims.reap(database) == 0


def test_shards_of_a_gone_engine_are_given_back_at_once(database: Database) -> None:
    put(database)
    take(database, "gone")
    assert claims.owners(database) == ["gone"]
    assert claims.reap(database, ["gone"]) == 1
    assert take(database, "new").attempt == 2


def test_a_shard_that_crashes_three_times_fails_its_job_only(database: Database) -> None:
    poison = put(database, 1)
    for attempt in range(1, 4):
        ticket = take(database)
        assert ticket.attempt == attempt
        assert claims.give_back(database, ticket, crashed=True, reason=" (signal 11)")
    ended = view(database, poison.id)
    assert ended.state == "failed"
    assert ended.problem is not None
    assert ended.problem["type"] == "/problems/compute-crashed"
    assert "died 3 times while working on point 0 (signal 11)" in ended.problem["detail"]
    other = put(database, 2)
    claims.finish(database, take(database), [b""], 0.1)
    assert view(database, other.id).state == "succeeded"


def test_lost_engines_do_not_count_as_crashes(database: Database) -> None:
    made = put(database)
    for _ in range(claims.CRASH_LIMIT + 2):
        claims.give_back(database, take(database), crashed=False)
    assert view(database, made.id).state == "running"
    for _ in range(claims.LOSS_LIMIT - claims.CRASH_LIMIT - 2):
        claims.give_back(database, take(database), crashed=False)
    assert view(database, made.id).state == "failed"


def test_cancelling_takes_the_lease_away(database: Database) -> None:
    made = put(database)
    ticket = take(database)
    assert cancel(database, made.id).state == "cancelled"
    assert claims.renew(database, [ticket], 30) == set()
    assert not claims.finish(database, ticket, [b"late"], 1.0)
    with pytest.raises(JobFinished, match="already ended"):
        cancel(database, made.id)


def test_engines_claiming_at_once_share_every_point_once(database: Database) -> None:
    made = put(database, total=300, point_s=0.1)
    seen: Counter[int] = Counter()
    guard = threading.Lock()

    def engine(number: int) -> None:
        idle = 0
        while idle < 20:
            ticket = claims.claim(database, f"e{number}", 30)
            if ticket is None:
                idle += 1
                continue
            if claims.finish(database, ticket, [b""], 0.1 * (ticket.stop - ticket.start)):
                with guard:
                    seen.update(range(ticket.start, ticket.stop) if ticket.role == "points" else [])

    with ThreadPoolExecutor(4) as pool:
        list(pool.map(engine, range(4)))
    assert seen == Counter(range(300))
    assert view(database, made.id).state == "succeeded"


# ---------------------------------------------------------------- fairness and expiry


def test_keys_take_turns_and_interactive_work_goes_first(database: Database) -> None:
    put(database, 1, total=1000, point_s=1.0, key_id="big")
    small = put(database, 2, total=4, point_s=1.0, key_id="small")
    owners = [take(database).job_id == small.id for _ in range(6)]
    assert sum(owners) == 3
    urgent = put(database, 3, lane=records.INTERACTIVE, key_id="big")
    assert take(database).job_id == urgent.id


def test_an_interactive_engine_leaves_batch_work_alone(database: Database) -> None:
    put(database, 1)
    assert claims.claim(database, "quick", 30, lanes=[records.INTERACTIVE]) is None


def test_expired_results_are_gone_and_may_be_computed_again(database: Database) -> None:
    made = put(database)
    claims.finish(database, take(database), [b"x"], 0.1)
    assert expire(database, keep_s=60) == 0
    assert expire(database, keep_s=0) == 1
    gone = view(database, made.id)
    assert (gone.state, gone.has_result) == ("succeeded", False)
    assert list(claims.parts_of(database, made.id)) == []
    assert request_of(database, made.id) is None
    assert put(database).id != made.id


def test_a_database_that_is_away_is_a_clear_refusal() -> None:
    away = Database("postgresql://postgres@127.0.0.1:1/none")
    with pytest.raises(StorageUnavailable, match="cannot be reached"), away.reading():
        pass


NO_ROOM = """
CREATE FUNCTION no_room() RETURNS trigger LANGUAGE plpgsql AS
$$ BEGIN RAISE 'Platte voll' USING ERRCODE = 'disk_full'; END $$;
CREATE TRIGGER no_room BEFORE INSERT ON output EXECUTE FUNCTION no_room();
"""
"""What PostgreSQL answers when it cannot extend a table's file, in a language nobody looks for."""


@contextmanager
def full_disk(database: Database) -> Iterator[None]:
    """No row of an output finds room: a limit of pages on SQLite, a trigger on PostgreSQL."""
    if database.is_sqlite:
        with database.reading() as connection:
            pages = connection.exec_driver_sql("PRAGMA page_count").scalar()
            connection.exec_driver_sql(f"PRAGMA max_page_count = {pages}")
        yield
        with database.reading() as connection:
            connection.exec_driver_sql("PRAGMA max_page_count = 1000000")
        return
    with database.writing() as connection:
        connection.exec_driver_sql(NO_ROOM)
    yield
    with database.writing() as connection:
        connection.exec_driver_sql("DROP TRIGGER no_room ON output")


def test_a_full_disk_is_a_clear_refusal_and_loses_nothing(database: Database) -> None:
    made = put(database)
    ticket = take(database)
    with full_disk(database):
        with pytest.raises(StorageUnavailable, match="no room left"):
            claims.finish(database, ticket, [bytes(1_000_000)], 0.1)
        assert view(database, made.id).done == 0
        assert shards(database, made.id)[0].state == "running"
    assert claims.finish(database, ticket, [bytes(1_000_000)], 0.1)
    assert view(database, made.id).state == "succeeded"
