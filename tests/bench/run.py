"""Print the service's figures against floors measured in the same run: `python tests/bench/run.py p1 p2 …`.

Without names, all of them. Ratios are what counts; the machine's own speed cancels out.
"""

from __future__ import annotations

import argparse
import json
import os
import socket
import subprocess
import sys
import tempfile
import time
import urllib.request
from datetime import timedelta
from pathlib import Path
from typing import Any

HERE = Path(__file__).parent
sys.path[:0] = [str(HERE), str(HERE.parent)]

import electrical  # noqa: E402
import national  # noqa: E402
import psycopg  # noqa: E402
import world as worlds  # noqa: E402
from tools import analyze, empty, plain, say, served  # noqa: E402

from service.application import visit_content  # noqa: E402
from support import postgres  # noqa: E402

CLIENTS = 16
WARM_UP = 100
SLOW_COMMIT = """
CREATE FUNCTION slow_commit() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN PERFORM pg_sleep(0.005); RETURN NULL; END $$;
CREATE CONSTRAINT TRIGGER slow_commit AFTER INSERT ON journal DEFERRABLE INITIALLY DEFERRED
FOR EACH ROW EXECUTE FUNCTION slow_commit();
"""
"""Stands for a disk that takes 5 ms: the sleep is in COMMIT, with every lock still held."""


def load(base: str, requests: list[dict[str, Any]]) -> dict[str, float]:
    """What the clients of `load.py` measured."""
    lines = "\n".join(json.dumps(one) for one in requests)
    done = subprocess.run(
        [sys.executable, HERE / "load.py", base, str(CLIENTS)],
        input=lines,
        capture_output=True,
        text=True,
        check=True,
    )
    return dict(json.loads(done.stdout))


def posts(world: worlds.World, depots: tuple[str, ...], count: int) -> list[dict[str, Any]]:
    """Requests that post a visit each, spread over depots and sections."""
    made = []
    for number in range(count):
        depot = depots[number % len(depots)]
        section = world.sections[(number // len(depots)) % len(world.sections)]
        at = worlds.NOW - timedelta(seconds=count - number)
        body = json.dumps(visit_content.wire(worlds.visit(section, at)))
        made.append({"path": f"/v1/depots/{depot}/visits", "key": world.keys[depot], "body": body})
    return made


def p1(servers: postgres.Databases) -> None:
    """One visit a request: share of the same app writing the same rows and judging nothing."""
    for commit in ("", SLOW_COMMIT):
        for depot_count in (1, 16):
            shares = {}
            for module in ("floor", "service"):
                with servers.cloned(empty) as url:
                    world = worlds.build(url, depot_count, 320)
                    if commit:
                        with psycopg.connect(plain(url), autocommit=True) as connection:
                            connection.execute(commit)
                    world.service.database.close()
                    requests = posts(world, world.depots, 1500 if not commit or depot_count > 1 else 600)
                    with served(module, url) as base:
                        load(base, requests[:WARM_UP])
                        analyze(url)
                        shares[module] = load(base, requests[WARM_UP:])
            ours, floor = shares["service"]["per_second"], shares["floor"]["per_second"]
            name = (
                f"{depot_count} depot{'s' if depot_count > 1 else ''}{', commit of 5 ms' if commit else ''}"
            )
            say(
                "P1",
                f"{name}: {ours / floor:.2f} of the floor ({ours:.0f}/s of {floor:.0f}/s; "
                "first bar 0.4, aim 0.7)",
            )


def p2(servers: postgres.Databases) -> None:
    """200 visits a request: readings a second as a share of raw COPY of the readings.

    As a client that catches up posts them: one visit a line, without asking for the verdicts.
    """
    import floor

    with servers.cloned(empty) as url:
        world = worlds.build(url, 1, 2000)
        batches = []
        for number in range(12):
            several = [
                visit_content.wire(worlds.visit(world.sections[(number * 200 + place) % 2000], worlds.NOW))
                for place in range(200)
            ]
            batches.append(several)
        requests = [
            {
                "path": "/v1/depots/depot-00/visits/batch",
                "key": world.keys["depot-00"],
                "body": "\n".join(map(json.dumps, batch)),
            }
            for batch in batches
        ]
        world.service.database.close()
        with served("service", url) as base:
            began = time.perf_counter()
            one_at_a_time(base, requests[:2])
            analyze(url)
            began = time.perf_counter()
            one_at_a_time(base, requests[2:])
            took = time.perf_counter() - began
        readings = sum(len(visit["readings"]) for batch in batches[2:] for visit in batch)
        ours = readings / took
        with psycopg.connect(plain(url), autocommit=True) as connection:
            connection.execute("TRUNCATE reading")
        raw = floor.copy_readings(
            plain(url), "depot-00", [v for batch in batches for v in batch], time.perf_counter
        )
    say("P2", f"{ours / raw:.2f} of raw COPY ({ours:.0f} of {raw:.0f} readings/s; first bar 0.2, aim 0.4)")


def p3(servers: postgres.Databases) -> None:
    """Audit of 10,000 and 100,000 sections by twenty limits (P3, P4), and a page of them by status (P5)."""
    found, pages = {}, {}
    for count in (1_000, 10_000, 100_000):
        with servers.cloned(empty) as url:
            worlds.build(url, 1, count).service.database.close()
            national.fill(plain(url))
            pages[count] = national.measured("list", url)
            if count > 1_000:
                found[count] = national.measured("audit", url)
    large, small = found[100_000], found[10_000]
    say(
        "P3",
        f"{large['seconds']:.1f} s, {large['mib']:.0f} MiB more (first bar 25 s, 400 MiB; aim 8 s, 200 MiB)",
    )
    say(
        "P4",
        f"x {large['seconds'] / small['seconds']:.1f} from 10,000 to 100,000 (first bar x 13, aim x 10.5)",
    )
    for name, took in pages[100_000].items():
        ratio = took / pages[1_000][name]
        say("P5", f"{name}: x {ratio:.2f} ({1000 * took:.2f} ms; first bar x 2, aim x 1.2)")


def p8(_servers: postgres.Databases) -> None:
    """`shuntbook serve` on a migrated SQLite file: to its first answer, and memory when idle."""
    with tempfile.TemporaryDirectory() as folder:
        environment = {**os.environ, "SHUNTBOOK_DATABASE_URL": f"sqlite:///{folder}/idle.db"}
        command = [str(Path(sys.executable).with_name("shuntbook"))]
        subprocess.run([*command, "migrate"], env=environment, check=True, capture_output=True)
        with socket.create_server(("127.0.0.1", 0)) as free:
            port = free.getsockname()[1]
        began = time.perf_counter()
        process = subprocess.Popen(
            [*command, "serve", "--port", str(port)], env=environment, stderr=subprocess.DEVNULL
        )
        try:
            while True:
                try:
                    with urllib.request.urlopen(f"http://127.0.0.1:{port}/health/ready", timeout=5):
                        break
                except OSError:
                    time.sleep(0.01)
            took = time.perf_counter() - began
            status = Path(f"/proc/{process.pid}/status").read_text()
            resident = next(line for line in status.splitlines() if line.startswith("VmRSS"))
            mib = int(resident.split()[1]) / 1024
        finally:
            process.terminate()
            process.wait()
    say("P8", f"{took:.2f} s, {mib:.0f} MiB (first bar 3 s, 200 MiB; aim 1.5 s, 120 MiB)")


def one_at_a_time(base: str, requests: list[dict[str, Any]]) -> None:
    """Post one after another on one connection."""
    import httpx

    with httpx.Client(base_url=base, timeout=60) as client:
        for one in requests:
            headers = {
                "Authorization": f"Bearer {one['key']}",
                "Content-Type": "application/x-ndjson",
                "Prefer": "return=minimal",
            }
            answer = client.post(one["path"], content=one["body"], headers=headers)
            assert answer.status_code in (200, 201), answer.text[:300]
            assert '"refused"' not in answer.text


def main() -> None:
    """Run the named measurements."""
    known = {
        "p1": p1,
        "p2": p2,
        "p3": p3,
        "p6": electrical.p6,
        "p7": electrical.p7,
        "p8": p8,
        "p9": electrical.p9,
        "proof": electrical.proof,
    }
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("names", nargs="*", help=f"of {', '.join(known)}; all if none is named")
    names = parser.parse_args().names or list(known)
    with postgres.databases() as servers:
        for name in names:
            known[name](servers)


if __name__ == "__main__":
    main()
