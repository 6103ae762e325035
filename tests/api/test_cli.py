"""The operator's commands: what they say, where they say it, and their exit codes."""

from __future__ import annotations

import json
import os
import sqlite3
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import closing
from datetime import UTC, datetime, timedelta
from pathlib import Path

import httpx
import psycopg
import pytest
import sqlalchemy as sa
from sqlalchemy import make_url

from service import cli
from service.app import make_service
from service.application import access, books, depots, sections, visits
from service.application.context import Service
from service.application.section_content import Content
from service.application.visit_content import Draft, ReadingDraft
from service.records import migrations
from service.records.tables import JournalLine, ReadingRow
from service.rules.words import CircuitKind, SectionState, Traction
from service.settings import Settings
from support import postgres
from support.api import ACTOR, TERMS
from support.house import ROOT
from support.process import serving

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(database_url: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """Run a command as its entry point does: exit code, standard output, standard error."""
    monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", database_url)

    def ran(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["shuntbook", *arguments])
        with pytest.raises(SystemExit) as ended:
            cli.main()
        out, err = capsys.readouterr()
        assert "Traceback" not in out + err
        return int(ended.value.code or 0), out, err

    return ran


@pytest.fixture
def service(database_url: str) -> Iterator[Service]:
    made = make_service(Settings(database_url=database_url))
    yield made
    made.database.close()


@pytest.fixture
def visited(service: Service) -> Service:
    """A depot with one section, visited once."""
    content = Content(
        state=SectionState.IN_USE,
        circuit_kind=CircuitKind.DC,
        traction=Traction.NONE,
        required_test_points=("relay_end",),
    )
    reading = ReadingDraft("drop_shunt", "relay_end", "as_left", "eq", 0.7, "Ohm", "SB-22")
    now = datetime.now(UTC) - timedelta(hours=1)
    draft = Draft("0197c0de-0000-7000-8000-000000000001", "TV114", now, readings=(reading,))
    with service.unit_of_work(ACTOR) as tx:
        depots.create(tx, "harrow", TERMS)
    with service.unit_of_work(ACTOR) as tx:
        sections.create(tx, "harrow", "TV114", content)
    with service.unit_of_work(ACTOR) as tx:
        assert [outcome.outcome for outcome in visits.post(tx, "harrow", [draft], None)] == ["stored"]
    return service


def test_migrate_says_what_it_did_and_may_be_repeated(run: Run, service: Service) -> None:
    code, out, err = run("migrate")
    assert (code, err) == (0, "")
    assert out.startswith(f"migrated to {migrations.newest()}\ndrafted ")
    with service.read() as connection:
        names = {
            (book.book, one.edition)
            for book in books.page(connection, after=None, most=9)
            for one in book.editions
        }
        assert len(names) == out.count("drafted ")
    assert run("migrate") == (0, f"migrated to {migrations.newest()}\n", "")


@pytest.mark.postgres
def test_migrate_makes_the_queue_in_a_schema_of_its_own(
    postgres_url: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", postgres_url)
    monkeypatch.setattr(sys, "argv", ["shuntbook", "migrate"])
    with pytest.raises(SystemExit):
        cli.main()
    plain = make_url(postgres_url).set(drivername="postgresql").render_as_string(hide_password=False)
    with psycopg.connect(plain) as connection:
        found = connection.execute(
            "SELECT DISTINCT schemaname FROM pg_tables WHERE tablename LIKE 'procrastinate%'"
        ).fetchall()
    assert found == [("procrastinate",)]
    assert "migrated" in capsys.readouterr().out


def test_keys_are_created_listed_and_revoked(run: Run, service: Service) -> None:
    code, text, err = run(
        "keys", "create", "--label", "k", "--holder", "R. Ashdown", "--scope", "read", "--days", "9"
    )
    assert (code, err) == (0, "")
    text = text.strip()
    with service.read() as connection:
        key = access.authenticate(connection, text, datetime.now(UTC))
    assert (key.label, key.holder, key.scopes) == ("k", "R. Ashdown", {"read"})
    code, listed, _ = run("keys", "list")
    assert json.loads(listed)["label"] == "k"
    assert text not in listed
    assert run("keys", "revoke", "k") == (0, "revoked k\n", "")
    assert json.loads(run("keys", "list")[1])["revoked_at"] is not None
    assert run("keys", "revoke", "nobody") == (1, "", "There is no key of this label.\n")
    code, out, err = run("keys", "create", "--label", "k2", "--holder", "h", "--scope", "everything")
    assert (code, out) == (1, "")
    assert "read, readings, register, limits, audit, admin" in err


def test_wrong_usage_is_two(run: Run) -> None:
    for wrong in (["nothing"], ["keys"], ["keys", "create"], ["serve", "--workers", "0"], ["audit"]):
        assert run(*wrong)[0] == 2, wrong
    code, _, err = run("audit", "harrow", "--as-of", "yesterday")
    assert (code, "2026-11-30" in err) == (2, True)


def test_an_audit_by_command(run: Run, visited: Service) -> None:
    code, out, _ = run("audit", "harrow")
    first = json.loads(out)
    assert (code, first["depot"], first["sections_judged"]) == (0, "harrow", 1)
    assert json.loads(run("audit", "harrow")[1]) == first
    assert run("audit", "nowhere")[::2] == (1, "There is no such depot.\n")
    code, _, err = run("audit", "harrow", "--as-of", "2099-01-01")
    assert (code, "future" in err) == (1, True)


def test_an_unbroken_journal_verifies(run: Run, visited: Service) -> None:
    assert run("journal", "verify") == (0, "every line fits\n", "")
    assert run("journal", "verify", "--records") == (0, "every line fits, and every visit\n", "")


def test_a_changed_line_is_named(run: Run, visited: Service) -> None:
    line = JournalLine.__table__  # type: ignore[attr-defined]
    with visited.database.write() as connection:
        connection.execute(
            sa.update(line).where(line.c.depot == "harrow", line.c.sequence == 2).values(actor="{}")
        )
    code, out, _ = run("journal", "verify")
    assert (code, out) == (1, "harrow: line 2: its content does not match its digest\n")


def test_a_changed_reading_is_named(run: Run, visited: Service) -> None:
    reading = ReadingRow.__table__  # type: ignore[attr-defined]
    with visited.database.write() as connection:
        connection.execute(sa.update(reading).values(value_given=0.9))
    assert run("journal", "verify")[0] == 0
    code, out, _ = run("journal", "verify", "--records")
    assert code == 1
    assert out == (
        "harrow: visit 0197c0de-0000-7000-8000-000000000001: what is stored does not match its digest\n"
    )


def test_a_visit_that_was_slipped_out_or_in_is_named(run: Run, visited: Service) -> None:
    line = JournalLine.__table__  # type: ignore[attr-defined]
    where = sa.and_(line.c.depot == "harrow", line.c.subject_kind == "visit")
    with visited.database.write() as connection:
        connection.execute(sa.update(line).where(where).values(subject_name="another"))
    out = run("journal", "verify", "--records")[1]
    assert "visit another: the journal records it, but it is not stored" in out
    assert "000000000001: it is stored, but the journal does not record it" in out


def test_rebuilding_the_latest_readings_changes_nothing(run: Run, visited: Service) -> None:
    def kept() -> list[object]:
        with visited.read() as connection:
            return list(connection.execute(sa.text("SELECT * FROM latest")))

    before = kept()
    assert len(before) == 1
    assert run("rebuild-latest", "harrow")[0] == 0
    assert kept() == before
    assert run("rebuild-latest", "nowhere")[0] == 1


def test_a_file_of_sections_is_imported_or_every_bad_line_named(
    run: Run, visited: Service, tmp_path: Path
) -> None:
    good, bad = tmp_path / "good.csv", tmp_path / "bad.csv"
    good.write_text(
        "section,state,circuit_kind,traction,required_test_points\nTV1,in_use,dc,none,relay_end\n"
    )
    bad.write_text(
        "section,state,circuit_kind,traction,required_test_points\nTV2,in_use,steam,none,relay_end\n"
    )
    assert run("sections", "import", "harrow", str(good), "--dry-run")[1].startswith("would be created 1")
    assert run("sections", "import", "harrow", str(good))[1].startswith("created 1")
    code, out, err = run("sections", "import", "harrow", str(bad))
    assert (code, out) == (1, "")
    assert "line 2, circuit_kind" in err
    assert run("sections", "import", "harrow", str(tmp_path / "none.csv"))[0] == 2


def test_the_document_is_printed(run: Run) -> None:
    out = run("openapi")[1]
    assert out == (ROOT / "openapi" / "openapi.json").read_text()


def test_settings_that_cannot_be(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SHUNTBOOK_PORT", "http")
    monkeypatch.setenv("SHUNTBOOK_LOG_LEVEL", "loud")
    code, _, err = run("keys", "list")
    assert (code, err) == (1, "Not a value it can have: SHUNTBOOK_PORT, SHUNTBOOK_LOG_LEVEL.\n")


def test_a_fault_of_the_program_is_one_line(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(_: object) -> None:
        raise RuntimeError("reading 0.31")

    monkeypatch.setattr("service.application.access.listed", broken)
    code, _, err = run("keys", "list")
    assert (code, "RuntimeError" in err, "0.31" in err, err.count("\n")) == (1, True, False, 1)


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
class TestOnSqlite:
    def test_a_backup_is_whole_and_new(self, run: Run, visited: Service, tmp_path: Path) -> None:
        target = tmp_path / "copy.db"
        assert run("backup", str(target)) == (0, f"wrote {target}\n", "")
        with closing(sqlite3.connect(target)) as copy:
            assert copy.execute("SELECT count(*) FROM reading").fetchone() == (1,)
        assert not (tmp_path / "copy.db-wal").exists()
        assert run("backup", str(target))[0] == 1
        assert run("backup", str(tmp_path / "no" / "where.db"))[0] == 1

    def test_a_restored_backup_verifies(
        self, run: Run, visited: Service, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        run("backup", str(tmp_path / "copy.db"))
        monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", f"sqlite:///{tmp_path / 'copy.db'}")
        assert run("journal", "verify", "--records")[0] == 0

    def test_commands_on_what_is_not_there(
        self, run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", f"sqlite:///{tmp_path / 'no' / 'folder.db'}")
        assert run("migrate")[::2] == (1, f"There is no folder {tmp_path / 'no'}.\n")
        monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", f"sqlite:///{tmp_path / 'none.db'}")
        for command in (["serve"], ["backup", str(tmp_path / "copy.db")]):
            code, _, err = run(*command)
            assert code == 1
            assert "There is no database at" in err
        assert list(tmp_path.glob("none*")) == []
        (tmp_path / "none.db").touch()
        code, _, err = run("serve")
        assert (code, "shuntbook migrate" in err) == (1, True)

    def test_more_than_one_process_is_refused_with_the_reason(self, run: Run) -> None:
        code, _, err = run("serve", "--workers", "2")
        assert code == 1
        assert "one writer" in err

    def test_a_worker_is_refused_with_the_reason(self, run: Run) -> None:
        assert run("worker")[::2] == (
            1,
            "On SQLite `shuntbook serve` does this itself; a worker needs PostgreSQL.\n",
        )

    def test_a_file_is_served_once(self, run: Run, database_url: str) -> None:
        with serving(database_url):
            code, _, err = run("serve", "--port", "0")
            assert code == 1
            assert "Another process serves" in err
            assert run("migrate")[::2] == (1, err)
            assert run("keys", "list")[0] == 0
        with serving(database_url) as served:
            assert httpx.get(f"{served.base_url}/health/ready").status_code == 200


@pytest.mark.postgres
def test_several_processes_serve_one_server(postgres_url: str) -> None:
    with serving(postgres_url, "--workers", "2") as served:
        for _ in range(10):
            assert httpx.get(f"{served.base_url}/health/ready").status_code == 200


@pytest.mark.postgres
def test_a_backup_of_a_server_is_restored_whole(
    postgres_url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    target, url = tmp_path / "copy.dump", make_url(postgres_url)

    def ran(*arguments: str) -> tuple[int, str]:
        monkeypatch.setattr(sys, "argv", ["shuntbook", *arguments])
        with pytest.raises(SystemExit) as ended:
            cli.main()
        return int(ended.value.code or 0), "".join(capsys.readouterr())

    monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", postgres_url)
    ran("keys", "create", "--label", "k", "--holder", "h", "--scope", "read")
    monkeypatch.setenv("PATH", str(tmp_path))
    code, said = ran("backup", str(target))
    assert (code, "pg_dump is not installed" in said) == (1, True)
    monkeypatch.setenv("PATH", str(postgres.usable_binaries()), prepend=os.pathsep)
    assert ran("backup", str(target)) == (0, f"wrote {target}\n")
    admin = url.set(drivername="postgresql").render_as_string(hide_password=False)
    restored = f"{url.database}_restored"
    with psycopg.connect(admin, autocommit=True) as connection:
        connection.execute(f'CREATE DATABASE "{restored}"')
        try:
            into = url.set(drivername="postgresql", database=restored).render_as_string(hide_password=False)
            subprocess.run([postgres.usable_binaries() / "pg_restore", "--dbname", into, target], check=True)
            monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", into)
            assert ran("journal", "verify", "--records") == (0, "every line fits, and every visit\n")
            assert json.loads(ran("keys", "list")[1])["label"] == "k"
        finally:
            connection.execute(f'DROP DATABASE "{restored}" WITH (FORCE)')
    monkeypatch.setenv("SHUNTBOOK_DATABASE_URL", str(url.set(database="nowhere")))
    code, said = ran("backup", str(tmp_path / "other.dump"))
    assert (code, "pg_dump failed" in said, (tmp_path / "other.dump").exists()) == (1, True, False)
