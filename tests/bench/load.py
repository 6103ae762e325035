"""Clients that post what they are given, each on a connection of its own, and how long they took.

Run as a process of its own, so that the clients do not share the server's interpreter:
`python load.py BASE CLIENTS` with one JSON line a request on standard input ({"path", "key", "body"}).
"""

from __future__ import annotations

import http.client
import json
import sys
import threading
import time
from urllib.parse import urlsplit


def run(base: str, clients: int, requests: list[dict[str, str]]) -> dict[str, float]:
    """Requests a second, and the 50th and 99th percentile of one request's time [ms]."""
    address = urlsplit(base)
    share = [requests[start::clients] for start in range(clients)]
    times: list[float] = []
    wrong: list[tuple[int, bytes]] = []
    barrier = threading.Barrier(clients + 1)

    def work(mine: list[dict[str, str]]) -> None:
        connection = http.client.HTTPConnection(address.hostname or "", address.port)
        connection.connect()
        barrier.wait()
        for one in mine:
            began = time.perf_counter()
            connection.request(
                "POST",
                one["path"],
                one["body"].encode(),
                {"Content-Type": "application/json", "Authorization": f"Bearer {one['key']}"},
            )
            answer = connection.getresponse()
            content = answer.read()
            times.append(time.perf_counter() - began)
            if answer.status not in (200, 201):
                wrong.append((answer.status, content[:300]))

    threads = [threading.Thread(target=work, args=(mine,)) for mine in share]
    for thread in threads:
        thread.start()
    barrier.wait()
    began = time.perf_counter()
    for thread in threads:
        thread.join()
    took = time.perf_counter() - began
    if wrong:
        raise SystemExit(f"{len(wrong)} requests failed, the first: {wrong[0]}")
    ordered = sorted(times)
    return {
        "per_second": len(requests) / took,
        "p50_ms": 1000 * ordered[len(ordered) // 2],
        "p99_ms": 1000 * ordered[int(len(ordered) * 0.99)],
    }


if __name__ == "__main__":
    print(json.dumps(run(sys.argv[1], int(sys.argv[2]), [json.loads(line) for line in sys.stdin])))
