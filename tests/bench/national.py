"""P3, P4, P5 and P8: judging and listing a national number of sections, and starting up.

The mass of visits is written by SQL from the sections that are there; what is measured goes through the
application, each measurement in a process of its own so that its memory can be told.
"""

from __future__ import annotations

import gc
import json
import subprocess
import sys
import time
from datetime import timedelta
from pathlib import Path
from typing import Any

import psycopg
import world as worlds

HERE = Path(__file__).parent

_VISITS = """
INSERT INTO visit (depot, visit, section, visited_at, received_at, received_by, holder, found_outside,
                   tasks, work_done, digest, ballast, rail, condition_left)
SELECT depot, md5(section || %(turn)s)::uuid::text, section, %(at)s, %(at)s, 'bench', 'bench', false,
       '[{"task": "shunt_test", "done": "done", "reason": null}]', '[]', md5(section), %(ballast)s,
       'clean', 'fit'
FROM section
"""
_READINGS = """
INSERT INTO reading (depot, visit, quantity, test_point, stage, section, visited_at, comparison, value,
                     value_given, unit_given, instrument, shunt_ohm, source)
SELECT s.depot, md5(s.section || %(turn)s)::uuid::text, r.quantity, r.test_point, 'as_left', s.section,
       %(at)s, 'eq', r.value * CASE WHEN %(spoil)s AND r.quantity = 'drop_shunt'
                                         AND right(s.section, 1) = '7' THEN 0.2 ELSE 1 END,
       r.value, r.unit, r.instrument, r.shunt_ohm, r.source
FROM section s CROSS JOIN json_to_recordset(%(readings)s::json) AS r(quantity text, test_point text,
     value float8, unit text, instrument text, shunt_ohm float8, source text)
"""
_LATEST = """
INSERT INTO latest (depot, section, quantity, test_point, visit, visited_at, as_left, comparison,
                    instrument, shunt_ohm, source)
SELECT depot, section, quantity, test_point, visit, visited_at, value, comparison, instrument, shunt_ohm,
       source
FROM reading WHERE visited_at = %(at)s
"""
_STATUSES = """
INSERT INTO status (depot, section, as_of, compliance, overdue, sequence)
SELECT depot, section, current_date, CASE WHEN number % 1000 = 0 THEN 'no'
       WHEN number % 10 = 0 THEN 'not_shown' ELSE 'yes' END, number % 2 = 0, 1
FROM (SELECT depot, section, row_number() OVER (ORDER BY section) AS number FROM section) AS numbered
"""


def fill(url: str) -> None:
    """Two visits of twelve readings to every section, the drop shunt of one in ten outside; kept statuses."""
    readings = [
        {
            "quantity": quantity,
            "test_point": test_point,
            "value": value,
            "unit": unit,
            "instrument": instrument,
            "shunt_ohm": 0.5 if quantity == "residual_voltage" else None,
            "source": "shunt" if quantity == "residual_voltage" else None,
        }
        for quantity, test_point, value, unit, instrument in worlds.READINGS
    ]
    with psycopg.connect(url, autocommit=True) as connection:
        for turn, days, ballast in (("a", 60, "wet"), ("b", 20, "damp")):
            at = worlds.NOW - timedelta(days=days)
            values: dict[str, Any] = {"turn": turn, "at": at, "ballast": ballast, "spoil": turn == "b"}
            connection.execute(_VISITS, values)
            connection.execute(_READINGS, {**values, "readings": json.dumps(readings)})
        connection.execute(_LATEST, {"at": worlds.NOW - timedelta(days=20)})
        connection.execute(_STATUSES)
        connection.execute("ANALYZE")


def measured(what: str, url: str) -> dict[str, float]:
    """What this file, run as a process of its own, measured."""
    done = subprocess.run(
        [sys.executable, __file__, what, url], capture_output=True, text=True, check=True, cwd=HERE
    )
    return dict(json.loads(done.stdout.splitlines()[-1]))


def _service(url: str) -> Any:
    from uuid6 import uuid7

    from service.application.context import Service
    from service.records.engine import Database

    return Service(Database(url, 10), lambda: worlds.NOW, lambda: str(uuid7()))


def _audit(url: str) -> dict[str, float]:
    from service.application import audits
    from service.records.unit_of_work import Actor

    service = _service(url)
    with service.read() as connection:
        audits.due(connection, worlds.NOW)
    gc.freeze()  # as `serve` does
    before = _resident("VmRSS")
    Path("/proc/self/clear_refs").write_text("5")  # the peak counts from here
    began = time.perf_counter()
    row = audits.run(service, Actor("bench", "bench"), "depot-00")
    took = time.perf_counter() - began
    return {"seconds": took, "mib": _resident("VmHWM") - before, "judged": row.sections_judged}


def _resident(what: str) -> float:
    """Memory of this process [MiB]: `VmRSS` now, `VmHWM` at its peak."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return int(next(line for line in lines if line.startswith(what)).split()[1]) / 1024


def _list(url: str) -> dict[str, float]:
    from service.application import section_lists
    from service.rules.words import Compliance

    service = _service(url)
    times = {}
    for name, filters in (
        ("0.1 %", section_lists.Filters(compliance=Compliance.NO)),
        ("10 %", section_lists.Filters(compliance=Compliance.NOT_SHOWN)),
        ("100 %", section_lists.Filters()),
    ):
        several = []
        with service.read() as connection:
            for _ in range(30):
                began = time.perf_counter()
                section_lists.page(connection, "depot-00", filters, after=None, most=100)
                several.append(time.perf_counter() - began)
        times[name] = sorted(several)[len(several) // 2]
    return times


if __name__ == "__main__":
    sys.path[:0] = [str(HERE.parents[1])]
    print(json.dumps({"audit": _audit, "list": _list}[sys.argv[1]](sys.argv[2])))
