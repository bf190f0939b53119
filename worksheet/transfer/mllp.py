"""The listener: HL7 v2 over MLLP. Reads frames, hands them to one database thread, answers in their order."""

from __future__ import annotations

import asyncio
import logging
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

from .hl7_message import END, START, acknowledge, frames, header

log = logging.getLogger(__name__)
MAX_FRAME = 2 * 1024 * 1024
MAX_CONNECTIONS = 64
IDLE_SECONDS = 3600.0
Handler = Callable[[bytes], bytes]


class Listener:
    """Serves MLLP until stopped. ``handle`` turns a message into its acknowledgement; it runs in one thread.

    One thread for all connections: messages are stored one after the other, as SQLite does in any case, and the
    loop stays free to read, to answer and to notice that a sender has gone.
    """

    def __init__(self, host: str, port: int, handle: Handler) -> None:
        self.host, self.port, self.handle = host, port, handle
        self._thread = ThreadPoolExecutor(1, thread_name_prefix="messages")
        self._open = 0
        self._stop = asyncio.Event()

    async def serve(self, ready: Callable[[str, int], None] | None = None) -> None:
        """Listen until :meth:`stop`; a message being stored is finished and answered first."""
        server = await asyncio.start_server(self._connection, self.host, self.port, limit=64 * 1024)
        host, port = server.sockets[0].getsockname()[:2]
        if ready:
            ready(host, port)
        await self._stop.wait()
        server.close()
        await asyncio.get_running_loop().run_in_executor(self._thread, lambda: None)
        await asyncio.sleep(0.05)  # the last answer leaves
        self._thread.shutdown(wait=True)

    def stop(self) -> None:
        """End :meth:`serve`."""
        self._stop.set()

    async def _connection(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        self._open += 1
        try:
            if self._open <= MAX_CONNECTIONS:
                await self._converse(reader, writer)
        except (ConnectionError, TimeoutError):
            log.info("a sender went away")
        finally:
            self._open -= 1
            writer.close()

    async def _converse(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        buffer = bytearray()
        loop = asyncio.get_running_loop()
        while not self._stop.is_set():
            piece = await asyncio.wait_for(reader.read(64 * 1024), IDLE_SECONDS)
            if not piece:
                return
            buffer += piece
            for frame in frames(buffer):
                answer = await loop.run_in_executor(self._thread, self.handle, frame)
                writer.write(START + answer + END + b"\r")
                await writer.drain()
            if len(buffer) > MAX_FRAME:
                reason = f"the message is larger than {MAX_FRAME // 1024 // 1024} MB or its end mark is missing"
                writer.write(START + acknowledge(header(bytes(buffer[1:4000])), "AR", reason) + END + b"\r")
                await writer.drain()
                return
