"""Serving the page to this machine alone."""

from __future__ import annotations

import socket
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from threading import Thread

import uvicorn

from driftbook.store.errors import UsageError
from driftbook.store.page.app import create_app
from driftbook.store.page.drawn import warm_up

_HERE = "127.0.0.1"


@contextmanager
def listening(port: int) -> Iterator[socket.socket]:
    """A door on this machine's own address. Raises UsageError if the port is taken."""
    door = socket.socket()
    try:
        door.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            door.bind((_HERE, port))
        except OSError as error:
            raise UsageError(f"port {port} cannot be used ({error.strerror}); name another: --port 0.") from error
        yield door
    finally:
        door.close()


def serve(book: Path, door: socket.socket) -> None:
    """Answers until it is interrupted."""
    Thread(target=warm_up, daemon=True).start()
    config = uvicorn.Config(create_app(book), log_level="warning", access_log=False, server_header=False)
    uvicorn.Server(config).run(sockets=[door])
