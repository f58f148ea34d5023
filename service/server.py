"""The server process: takes its address before anything slow; at the end its solves stop first."""

from __future__ import annotations

import socket

import uvicorn
from fastapi import FastAPI

from service.settings import SettingsError

GRACE_S = 3  # how long an answer may still take to go out once the service is told to stop


def bind(host: str, port: int) -> socket.socket:
    """Take an address, not listening yet, and return its socket.

    Raises
    ------
    SettingsError
        The address cannot be taken.
    """
    listener = socket.socket(socket.AF_INET6 if ":" in host else socket.AF_INET)
    listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listener.bind((host, port))
    except (OSError, OverflowError) as error:
        listener.close()
        why = getattr(error, "strerror", None) or "no such port"
        raise SettingsError(
            f"The service cannot listen on {host}, port {port}: {why}. Name another with --host "
            "or --port (1 to 65535)."
        ) from None
    return listener


class Server(uvicorn.Server):
    """A server that stops all work first, so that whoever waits for it is told."""

    def __init__(self, config: uvicorn.Config, app: FastAPI) -> None:
        super().__init__(config)
        self._app = app

    async def shutdown(self, sockets: list[socket.socket] | None = None) -> None:
        """Stop the work, answer those who wait, close."""
        self._app.state.solves.halt()
        self._app.state.tiles.halt()
        await super().shutdown(sockets)


def serve(app: FastAPI, listener: socket.socket) -> None:
    """Serve until told to stop."""
    config = uvicorn.Config(
        app, log_level="warning", server_header=False, timeout_graceful_shutdown=GRACE_S
    )
    Server(config, app).run(sockets=[listener])
