"""A scripted far end: answers a CONNECT as told, for what no real broker does on demand."""

import asyncio
import contextlib
from collections.abc import AsyncIterator, Callable

from tests.publish.mqtt.wireclient import CONNACK, packet

ACCEPT = packet(CONNACK, 0, b"\0\0\0")


@contextlib.asynccontextmanager
async def far_end(answer: bytes, after: Callable[[int, bytes], bytes | None] | None = None) -> AsyncIterator[int]:
    """Listen, send ``answer`` to the first packet, and for each later one what ``after(kind, body)`` returns.

    None closes the connection.  Yields the port.
    """
    writers: list[asyncio.StreamWriter] = []
    tasks: list[asyncio.Task[None]] = []

    async def talk(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        first = True
        with contextlib.suppress(asyncio.IncompleteReadError, OSError):
            while True:
                head = (await reader.readexactly(1))[0]
                size = shift = 0
                while True:
                    byte = (await reader.readexactly(1))[0]
                    size |= (byte & 0x7F) << shift
                    shift += 7
                    if not byte & 0x80:
                        break
                body = await reader.readexactly(size)
                reply = answer if first else after(head >> 4, body) if after is not None else b""
                first = False
                if reply is None:
                    break
                writer.write(reply)
        writer.close()

    def come(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        writers.append(writer)
        tasks.append(asyncio.ensure_future(talk(reader, writer)))

    server = await asyncio.start_server(come, "127.0.0.1", 0)
    try:
        yield server.sockets[0].getsockname()[1]
    finally:
        server.close()
        for writer in writers:
            writer.transport.abort()
        await asyncio.gather(*tasks, return_exceptions=True)
