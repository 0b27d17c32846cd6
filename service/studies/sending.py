"""Tables and answers of studies on their way to clients: few at a time, in threads of their own, piece by piece.

Other requests have their own threads and go on, and of what is sent no more is in memory than its pieces.
"""

from __future__ import annotations

import asyncio
import logging
import threading
from collections.abc import Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager

from starlette.responses import StreamingResponse
from starlette.types import Receive, Scope, Send

from service.refusals import QueueFull, Refusal

# Pieces made at the same time.
_THREADS = 2
_RETRY_AFTER_SECONDS = 5
# A client that takes nothing for so long has gone, or holds a place that others wait for.
STALLED_SECONDS = 30.0
_SENT_AT_ONCE = 1 << 18

logger = logging.getLogger("service")


class Sending:
    """Makes what is sent. most: that are sent at the same time."""

    def __init__(self, most: int) -> None:
        self._most = most
        self._lock = threading.Lock()
        self._taken = 0
        self._pool = ThreadPoolExecutor(_THREADS, thread_name_prefix="tables")

    @contextmanager
    def place(self) -> Iterator[None]:
        """One of the places for what is sent. Raises QueueFull when all are taken."""
        with self._lock:
            if self._taken >= self._most:
                raise QueueFull(
                    f"{self._taken} tables and answers of studies are being sent; try again later.",
                    _RETRY_AFTER_SECONDS,
                )
            self._taken += 1
        try:
            yield
        finally:
            with self._lock:
                self._taken -= 1

    async def next_of(self, pieces: Iterator[bytes]) -> bytes | None:
        """The next piece, made in a thread; None after the last one."""
        return await asyncio.get_running_loop().run_in_executor(self._pool, next, pieces, None)

    def close(self) -> None:
        """Make no more pieces."""
        self._pool.shutdown(wait=True, cancel_futures=True)


class Pieces(StreamingResponse):
    """An answer of which each piece is made when the one before it has been taken.

    What is refused before the first piece is told in an error document. What fails later, and a client that takes
    nothing any more, breaks the answer off without its end, so that nobody takes a part for the whole.
    """

    def __init__(self, sending: Sending, pieces: Iterator[bytes], media_type: str, headers: Mapping[str, str]) -> None:
        super().__init__((), media_type=media_type, headers=headers)
        self._sending = sending
        self._pieces = pieces

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Send it, as far as the client takes it."""
        with self._sending.place():
            await super().__call__(scope, receive, send)

    async def stream_response(self, send: Send) -> None:
        """Send the pieces."""
        piece = await self._sending.next_of(self._pieces)
        await send({"type": "http.response.start", "status": self.status_code, "headers": self.raw_headers})
        try:
            while piece is not None:
                for begin in range(0, len(piece), _SENT_AT_ONCE):
                    body = piece[begin : begin + _SENT_AT_ONCE]
                    sent = send({"type": "http.response.body", "body": body, "more_body": True})
                    await asyncio.wait_for(sent, STALLED_SECONDS)
                piece = await self._sending.next_of(self._pieces)
        except (Refusal, TimeoutError) as error:
            logger.warning("A table or answer of a study is broken off (%s).", str(error) or "nothing was taken of it")
            return
        await send({"type": "http.response.body", "body": b"", "more_body": False})
