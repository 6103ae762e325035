"""The hourly tick: each due audit happens once, whoever ticks, in the process or by workers."""

from __future__ import annotations

import asyncio
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from datetime import UTC, date, datetime
from pathlib import Path

import pytest
import sqlalchemy as sa
from procrastinate.exceptions import AlreadyEnqueued

from service.app import make_service, utc_now
from service.application import audits, depots
from service.application.context import Service
from service.errors import UnavailableError
from service.jobs import scheduler, tick, worker
from service.records import journal
from service.records.tables import Audit
from service.settings import Settings
from support.api import ACTOR, TERMS, Clock

MONDAY = date(2026, 11, 30)


@pytest.fixture
def clock() -> Clock:
    """Monday, 09:00 UTC; the depots' hour is Monday 05:00 in London."""
    return Clock()


@pytest.fixture
def service(database_url: str, clock: Clock) -> Iterator[Service]:
    """Two depots, old enough for tests that go by the real clock."""
    made = make_service(Settings(database_url=database_url), clock)
    then, clock.now = clock.now, datetime(2020, 1, 6, tzinfo=UTC)
    with made.unit_of_work(ACTOR) as tx:
        for name in ("harrow", "marsh"):
            depots.create(tx, name, TERMS)
    clock.now = then
    yield made
    made.database.close()


def stored(service: Service) -> list[tuple[str, date]]:
    audit = Audit.__table__  # type: ignore[attr-defined]
    with service.read() as connection:
        rows = connection.execute(
            sa.select(audit.c.depot, audit.c.audit).order_by(audit.c.audit, audit.c.depot)
        )
        return [(row.depot, row.audit) for row in rows]


def until(done: Callable[[], bool]) -> None:
    deadline = time.monotonic() + 20
    while not done() and time.monotonic() < deadline:
        time.sleep(0.02)
    assert done()


def test_a_tick_runs_what_is_due_and_only_that(service: Service, clock: Clock) -> None:
    assert tick.run_due(service) == 2
    assert stored(service) == [("harrow", MONDAY), ("marsh", MONDAY)]
    assert tick.run_due(service) == 0
    clock.move(days=6, hours=19, minutes=59)  # Monday, 04:59 in London
    assert tick.run_due(service) == 0
    clock.move(minutes=1)
    assert tick.run_due(service) == 2
    assert stored(service)[2:] == [("harrow", date(2026, 12, 7)), ("marsh", date(2026, 12, 7))]


def test_ticks_that_meet_make_each_audit_once(service: Service) -> None:
    """Both have seen what is due before either begins."""
    barrier, due = threading.Barrier(2, timeout=20), audits.due
    found: list[int] = []

    def together(*arguments: object) -> object:
        seen = due(*arguments)  # type: ignore[arg-type]
        barrier.wait()
        return seen

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("service.application.audits.due", together)
        threads = [threading.Thread(target=lambda: found.append(tick.run_due(service))) for _ in range(2)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    assert len(found) == 2
    assert stored(service) == [("harrow", MONDAY), ("marsh", MONDAY)]
    with service.read(snapshot=True) as connection:
        actions = [line["action"] for line in journal.lines(connection, "harrow")]
        assert actions.count("audit_finished") == 1


def test_one_audit_that_fails_does_not_stop_the_others(
    service: Service, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = audits.run

    def failing(service: Service, actor: object, depot: str, on: date) -> object:
        if depot == "harrow":
            raise UnavailableError("The database is locked.")
        return run(service, actor, depot, on)  # type: ignore[arg-type]

    monkeypatch.setattr("service.application.audits.run", failing)
    assert tick.run_due(service) == 1
    assert stored(service) == [("marsh", MONDAY)]
    monkeypatch.undo()
    assert tick.run_due(service) == 1


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_the_serving_process_looks_at_once(service: Service) -> None:
    stop = scheduler.start(replace(service, clock=utc_now))
    until(lambda: len(stored(service)) == 2)
    stop()
    assert not [thread for thread in threading.enumerate() if "APScheduler" in thread.name]


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_a_tick_that_cannot_reach_the_database_is_no_crash(
    service: Service, monkeypatch: pytest.MonkeyPatch
) -> None:
    def gone(*_: object) -> None:
        raise UnavailableError("The database was not reached.")

    monkeypatch.setattr("service.application.audits.due", gone)
    called = threading.Event()
    monkeypatch.setattr("service.jobs.scheduler.log.warning", lambda *_, **__: called.set())
    stop = scheduler.start(replace(service, clock=utc_now))
    assert called.wait(20)
    stop()


@pytest.mark.postgres
@pytest.mark.parametrize("database_url", [pytest.param("postgres")], indirect=True)
class TestOnPostgres:
    def test_the_queue_is_made_once_and_anew_for_another_version(self, service: Service) -> None:
        for _ in range(2):
            worker.create_tables(service.database.url)
        with service.database.write() as connection:
            connection.execute(sa.text("COMMENT ON SCHEMA procrastinate IS 'another'"))
            connection.execute(sa.text("CREATE TABLE procrastinate.left_over (n integer)"))
        worker.create_tables(service.database.url)
        with service.read() as connection:
            assert not sa.inspect(connection).has_table("left_over", schema="procrastinate")
            assert sa.inspect(connection).has_table("procrastinate_jobs", schema="procrastinate")

    def test_a_queued_tick_is_worked_once(self, service: Service) -> None:
        worker.create_tables(service.database.url)
        queue = worker.make_queue(service)

        async def deferred() -> None:
            async with queue.open_async():
                await queue.configure_task("tick", queueing_lock="tick").defer_async(timestamp=0)
                await queue.run_worker_async(wait=False, delete_jobs="always", install_signal_handlers=False)

        asyncio.run(deferred())
        assert stored(service) == [("harrow", MONDAY), ("marsh", MONDAY)]
        with service.read() as connection:
            left = connection.execute(sa.text("SELECT count(*) FROM procrastinate.procrastinate_jobs"))
            assert left.scalar_one() == 0

    def test_many_ticks_wait_as_one(self, service: Service) -> None:
        """The queueing lock: 20 defers queue one job."""
        worker.create_tables(service.database.url)
        queue = worker.make_queue(service)

        async def defer_many() -> int:
            refused = 0
            async with queue.open_async():
                for number in range(20):
                    try:
                        await queue.configure_task("tick", queueing_lock="tick").defer_async(timestamp=number)
                    except AlreadyEnqueued:
                        refused += 1
            return refused

        assert asyncio.run(defer_many()) == 19

    @staticmethod
    def workers(service: Service) -> int:
        """Workers at work: they hear signals from then on."""
        with service.read() as connection:
            found = connection.execute(sa.text("SELECT count(*) FROM procrastinate.procrastinate_workers"))
            return int(found.scalar_one())

    def test_a_worker_process_audits_and_stops_when_told(self, service: Service) -> None:
        """A real process, so by the real clock: the depots are older than their last weekly hour."""
        worker.create_tables(service.database.url)
        environment = os.environ | {"SHUNTBOOK_DATABASE_URL": service.database.url}
        command = [Path(sys.executable).parent / "shuntbook", "worker"]
        process = subprocess.Popen(command, env=environment, stderr=subprocess.PIPE, text=True)
        until(lambda: len(stored(service)) == 2 and self.workers(service) == 1)
        process.send_signal(signal.SIGTERM)
        _, err = process.communicate(timeout=30)
        assert process.returncode == 0
        assert "Traceback" not in err
