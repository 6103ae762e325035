"""The operator's commands: each checks its arguments, calls one layer below, and says what came of it.

Besides `app.py` the only place that reads the clock and makes secrets. What can go wrong is said in one
line on the standard error stream, with exit code 1; wrong usage is 2.
"""

from __future__ import annotations

import getpass
import json
import os
import secrets
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import date, timedelta
from pathlib import Path
from typing import Annotated, NoReturn

import typer
from pydantic import ValidationError

from service.application.context import Service
from service.errors import Fault, NotAcceptableError, ShuntbookError, StorageFaultError
from service.records.unit_of_work import Actor
from service.settings import PREFIX, Settings, from_environment

cli = typer.Typer(no_args_is_help=True, add_completion=False, pretty_exceptions_enable=False)
keys = typer.Typer(no_args_is_help=True, help="Access keys: create, list, revoke.")
sections = typer.Typer(no_args_is_help=True, help="The register of track circuits.")
journal = typer.Typer(no_args_is_help=True, help="The chained record of every change.")
for name, group in {"keys": keys, "sections": sections, "journal": journal}.items():
    cli.add_typer(group, name=name)


@cli.callback()
def shuntbook() -> None:
    """Track circuit records, limits and verdicts for a signalling depot."""


@cli.command("serve")
def serve_api(
    host: Annotated[str | None, typer.Option(help="Address to listen on.")] = None,
    port: Annotated[int | None, typer.Option(help="Port to listen on.", min=0, max=65535)] = None,
    workers: Annotated[int, typer.Option(help="Processes; more than one on PostgreSQL only.", min=1)] = 1,
) -> None:
    """Serve the API."""
    from service.app import serve

    settings = _settings()
    serve(settings, host=host or settings.host, port=settings.port if port is None else port, workers=workers)


@cli.command("demo")
def serve_demo(
    directory: Annotated[Path, typer.Option(help="Folder for its database and keys.")] = Path(
        "shuntbook-demo"
    ),
    port: Annotated[int | None, typer.Option(help="Port to listen on.", min=0, max=65535)] = None,
    keep: Annotated[bool, typer.Option("--keep", help="Serve the demo that is there, if one is.")] = False,
) -> None:
    """Build an invented depot, show the first lines of its weekly list, and serve it."""
    from service.app import make_service, serve
    from service.demo import folder, summary

    file = folder.database(directory)
    chosen = _settings()
    settings = chosen.model_copy(
        update={"database_url": f"sqlite:///{file}", "port": chosen.port if port is None else port}
    )
    if not (keep and folder.is_complete(directory)):
        _build_demo(directory, settings)
    service = make_service(settings)
    for line in summary.first_lines(service):
        print(line)
    service.database.close()
    for line in summary.where_to_look(f"http://{settings.host}:{settings.port}", directory / folder.KEYS):
        print(line, flush=True)
    serve(settings, host=settings.host, port=settings.port, workers=1)


def _build_demo(directory: Path, settings: Settings) -> None:
    from service.app import make_service
    from service.demo import folder
    from service.demo.build import SEED, build
    from service.records import migrations

    folder.make_fresh(directory)
    migrations.upgrade(settings.database_url)
    service = make_service(settings)
    built = build(service, SEED, secrets.token_bytes, lambda line: print(line, flush=True))
    service.database.close()
    folder.write_keys(directory, built.keys)
    print(", ".join(f"{count} {what}" for what, count in built.counts.items()))


@cli.command()
def migrate() -> None:
    """Bring the database to this version's tables, and draft the limit books that come with it."""
    from service.app import alone_on
    from service.application import editions
    from service.jobs.worker import create_tables
    from service.records import migrations
    from service.records.engine import sqlite_path

    url = _settings().database_url
    path = sqlite_path(url)
    with alone_on(path):
        migrations.upgrade(url)
        with _running() as service, service.unit_of_work(Actor("migrate", "shuntbook")) as tx:
            drafted = editions.load_bundled(tx)
    if path is None:
        create_tables(url)
    print(f"migrated to {migrations.newest()}")
    for book, edition in drafted:
        print(f"drafted {book} {edition}: your own people check it before they issue it")


@cli.command()
def worker() -> None:
    """Run due audits every hour, beside the servers on PostgreSQL."""
    from service.api import logs
    from service.jobs.worker import work

    with _running() as service:
        if service.database.is_sqlite:
            raise StorageFaultError(
                "On SQLite `shuntbook serve` does this itself; a worker needs PostgreSQL."
            )
        logs.to_stderr(_settings().log_level)
        work(service)


@cli.command()
def audit(
    depot: Annotated[str, typer.Argument(help="The depot.")],
    as_of: Annotated[
        str | None, typer.Option(help="A day, as 2026-11-30; the depot's today if absent.")
    ] = None,
) -> None:
    """Judge a depot as of a day and keep the result; the same day again gives what is kept."""
    from service.application import audits

    with _running() as service:
        row = audits.run(service, _actor(), depot, _day(as_of))
    print(json.dumps(audits.wire(row), indent=2, ensure_ascii=False))


@keys.command("create")
def create_key(
    label: Annotated[str, typer.Option(help="A name for the key; never used twice.")],
    holder: Annotated[str, typer.Option(help="The person or system that has it.")],
    scope: Annotated[
        list[str], typer.Option(help="read, readings, register, limits, audit or admin; repeat.")
    ],
    depot: Annotated[str | None, typer.Option(help="The only depot it is good for.")] = None,
    device: Annotated[str | None, typer.Option(help="The only device it may post as.")] = None,
    days: Annotated[int | None, typer.Option(help="Days until it expires.", min=1, max=3660)] = None,
) -> None:
    """Issue a key. Its text is printed once, alone on the standard output, and kept nowhere."""
    from service.application import access

    with _running() as service, service.unit_of_work(_actor()) as tx:
        expires = None if days is None else tx.now + timedelta(days=days)
        wanted = access.Wanted(label, holder, scope, depot, device, expires)
        text = access.create(tx, wanted, secrets.token_bytes(32))
    print(text)


@keys.command("list")
def list_keys() -> None:
    """Every key ever issued, one JSON object a line; never their texts."""
    from service.application import access

    with _running() as service, service.read() as connection:
        found = access.listed(connection)
    for key in found:
        print(json.dumps(access.content(key), ensure_ascii=False))


@keys.command("revoke")
def revoke_key(label: Annotated[str, typer.Argument(help="The key's label.")]) -> None:
    """Make a key useless from now on."""
    from service.application import access

    with _running() as service, service.unit_of_work(_actor()) as tx:
        access.revoke(tx, label)
    print(f"revoked {label}")


@sections.command("import")
def import_sections(
    depot: Annotated[str, typer.Argument(help="The depot.")],
    file: Annotated[Path, typer.Argument(help="A CSV file, as the API's export writes it.", exists=True)],
    dry_run: Annotated[bool, typer.Option("--dry-run", help="Say what it would do; write nothing.")] = False,
) -> None:
    """Record a whole file of track circuits: all of it, or nothing with every bad line named."""
    from service.api import section_files
    from service.application import sections_import

    given = section_files.read(file.read_bytes())
    with _running() as service:
        if dry_run:
            with service.read(snapshot=True) as connection:
                done = sections_import.rehearse(connection, depot, given, service.clock())
        else:
            with service.unit_of_work(_actor()) as tx:
                done = sections_import.run(tx, depot, given)
    print(f"{'would be ' if dry_run else ''}created {done.created}, changed {done.changed}, ", end="")
    print(f"left as they are {done.unchanged}")


@journal.command("verify")
def verify_journal(
    records: Annotated[bool, typer.Option("--records", help="Also compare stored visits.")] = False,
) -> None:
    """Walk every chain; names the first line of each that does not fit, and exits with 1."""
    from service.application import verification

    with _running() as service, service.read(snapshot=True) as connection:
        found = [
            f"{broken.depot}: line {broken.sequence}: {broken.reason}"
            for broken in verification.broken_chains(connection)
        ]
        if records:
            found += [
                f"{wrong.depot}: visit {wrong.visit}: {wrong.reason}"
                for wrong in verification.mismatched_visits(connection)
            ]
    for line in found:
        print(line)
    if found:
        raise typer.Exit(1)
    print("every line fits" + (", and every visit" if records else ""))


@cli.command("rebuild-latest")
def rebuild_latest(depot: Annotated[str, typer.Argument(help="The depot.")]) -> None:
    """Derive the latest readings of a depot again from all its visits; changes nothing if all is well."""
    from service.application import visits

    with _running() as service, service.unit_of_work(_actor()) as tx:
        count = visits.rebuild_latest(tx, depot)
    print(f"derived the latest readings of {count} track circuits")


@cli.command()
def backup(target: Annotated[Path, typer.Argument(help="A new file.")]) -> None:
    """Copy the whole database while it is in use."""
    from service.application.backup import take

    take(_settings().database_url, target)
    print(f"wrote {target}")


@cli.command()
def openapi() -> None:
    """Print the OpenAPI document."""
    from service.app import create_app

    document = create_app(Settings(database_url="sqlite://")).openapi()
    print(json.dumps(document, indent=2, ensure_ascii=False))


def main() -> None:
    """The entry point of `shuntbook`."""
    try:
        cli()
    except ShuntbookError as error:
        _fail(" ".join([error.detail, *(f"{_place(fault)}{fault.reason}." for fault in error.faults)]))
    except Exception as error:  # noqa: BLE001, no traceback for an operator
        from service.api.logs import whereabouts

        _fail(f"A fault in this program: {json.dumps(whereabouts(error))}")


def _settings() -> Settings:
    try:
        return from_environment(os.environ)
    except ValidationError as error:
        names = ", ".join(f"{PREFIX}{one['loc'][0]}".upper() for one in error.errors())
        raise NotAcceptableError(f"Not a value it can have: {names}.") from None


@contextmanager
def _running() -> Iterator[Service]:
    from service.app import make_service

    service = make_service(_settings())
    try:
        yield service
    finally:
        service.database.close()


def _actor() -> Actor:
    """Commands are journalled under the operating system's user."""
    return Actor("command", getpass.getuser())


def _day(text: str | None) -> date | None:
    try:
        return None if text is None else date.fromisoformat(text)
    except ValueError:
        raise typer.BadParameter("write a day as 2026-11-30") from None


def _place(fault: Fault) -> str:
    if fault.line is None:
        return ""
    return f"line {fault.line}" + (f", {fault.column}: " if fault.column else ": ")


def _fail(message: str) -> NoReturn:
    print(message, file=sys.stderr)
    raise SystemExit(1)
