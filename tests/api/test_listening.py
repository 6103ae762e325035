"""The socket that several serving processes share."""

from __future__ import annotations

import os
import socket

from service import app


def test_accepted_connections_do_not_wait_for_acknowledgements() -> None:
    """Linux hands the option on from the listening socket; asyncio sets it on none that it is handed."""
    with (
        app._listening("127.0.0.1", 0) as descriptor,
        socket.socket(fileno=os.dup(descriptor)) as listener,
        socket.create_connection(listener.getsockname()),
    ):
        accepted, _ = listener.accept()
        with accepted:
            assert accepted.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY) != 0
