"""`shuntbook demo` as people run it: the one that is there served again, what is not a demo refused."""

from __future__ import annotations

import re
import shutil
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import httpx
from demo.depot import Demo

from service.demo import folder
from service.demo.lines import DEPOT

SHUNTBOOK = Path(sys.executable).parent / "shuntbook"
STARTS_WITHIN_S = 30


def free_port() -> int:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        return int(listener.getsockname()[1])


@contextmanager
def kept(directory: Path, port: int, output: Path) -> Iterator[httpx.Client]:
    """Run `shuntbook demo --keep` and give a client once it answers."""
    base = f"http://127.0.0.1:{port}"
    command = [SHUNTBOOK, "demo", "--keep", "--directory", directory, "--port", str(port)]
    with (
        output.open("w") as out,
        subprocess.Popen(command, stdout=out, stderr=subprocess.STDOUT) as process,
        httpx.Client(base_url=base) as client,
    ):
        try:
            deadline = time.monotonic() + STARTS_WITHIN_S
            while not answers(client):
                assert process.poll() is None, output.read_text()
                assert time.monotonic() < deadline
                time.sleep(0.1)
            yield client
        finally:
            process.terminate()


def answers(client: httpx.Client) -> bool:
    try:
        return client.get("/health/ready").status_code == 200
    except httpx.ConnectError:
        return False


def test_a_kept_demo_is_shown_and_served_again(demo: Demo, tmp_path: Path) -> None:
    directory, output = tmp_path / "demo", tmp_path / "out"
    shutil.copytree(demo.directory, directory)
    port = free_port()
    with kept(directory, port, output) as client:
        said = output.read_text()
        address = re.search(r"Weekly list: (\S+)", said)
        assert address is not None
        page = client.get(address[1], auth=("anyone", demo.keys["read"]))
        section = client.get(
            f"/v1/depots/{DEPOT}/sections/CB145/status",
            headers={"Authorization": f"Bearer {demo.keys['read']}"},
        )
    assert "CB145" in said
    assert page.status_code == 200
    assert page.headers["content-type"].startswith("text/html")
    assert section.json()["section"] == "CB145"
    assert not any(key in said for key in demo.keys.values())


def test_a_file_that_is_no_demo_stops_it(tmp_path: Path) -> None:
    file = folder.database(tmp_path)
    file.write_bytes(b"minutes of a meeting")
    ran = subprocess.run(
        [SHUNTBOOK, "demo", "--directory", tmp_path], capture_output=True, text=True, check=False
    )
    assert ran.returncode == 1
    assert "nothing was deleted" in ran.stderr
    assert file.read_bytes() == b"minutes of a meeting"
