"""One server process for a measurement: prints its base URL, then serves until it is stopped.

`python serving.py service|floor URL`
"""

from __future__ import annotations

import socket
import sys
from pathlib import Path

sys.path[:0] = [str(Path(__file__).parent), str(Path(__file__).parents[1])]

import uvicorn  # noqa: E402
import world  # noqa: E402


def main() -> None:
    """Build the app, bind a free port, serve."""
    which, url = sys.argv[1:]
    if which == "floor":
        import floor

        app = floor.floor_app(url.replace("postgresql+psycopg", "postgresql"), 40)
    else:
        from service.app import create_app
        from service.settings import Settings

        app = create_app(Settings(database_url=url), clock=lambda: world.NOW, ticks=False)
    listener = socket.create_server(("127.0.0.1", 0), backlog=512)
    listener.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    print(f"http://127.0.0.1:{listener.getsockname()[1]}", flush=True)
    uvicorn.Server(uvicorn.Config(app, log_level="warning", access_log=False)).run(sockets=[listener])


if __name__ == "__main__":
    main()
