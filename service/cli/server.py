"""The server, saying where it is once it is there, and that it stops before it does."""

from __future__ import annotations

import signal
import socket
from types import FrameType

from uvicorn import Config, Server

from service.app import Application


class AnnouncingServer(Server):
    """Prints its addresses when it has started."""

    def __init__(self, config: Config, app: Application, address: str) -> None:
        super().__init__(config)
        self._application = app
        self._address = address

    async def startup(self, sockets: list[socket.socket] | None = None) -> None:
        """Start, and say where."""
        await super().startup(sockets)
        if self.started:
            print(
                f"Rimeward serves on {self._address}\n"
                f"  the API, to try:  {self._address}/docs\n"
                f"  is it ready:      {self._address}/readyz",
                flush=True,
            )

    def handle_exit(self, sig: int, frame: FrameType | None) -> None:
        """Begin to stop: a load balancer that asks is told so at once."""
        service = getattr(self._application.state, "service", None)
        if service is not None and sig in (signal.SIGINT, signal.SIGTERM):
            service.accepting = False
        super().handle_exit(sig, frame)
