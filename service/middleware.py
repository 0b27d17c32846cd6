"""Around every request, in plain ASGI: a limit on the body, the last resort, security headers, counts."""

from __future__ import annotations

import time
from collections.abc import Callable

from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.problem_details import problem_response, unforeseen_response

Count = Callable[[str, str, int, float], None]


class BodyLimit:
    """Turns a body away that is longer than allowed, by its header before a byte is read, or as soon as it
    shows.

    The body is read here as a whole and handed on, since every call needs it whole.
    """

    def __init__(self, app: ASGIApp, limit: int) -> None:
        self._app = app
        self._limit = limit

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one connection."""
        if scope["type"] != "http" or scope["method"] in ("GET", "HEAD", "OPTIONS"):
            await self._app(scope, receive, send)
            return
        declared = Headers(scope=scope).get("content-length", "0")
        if not declared.isdecimal() or len(declared) > 18 or int(declared) > self._limit:
            await self._refuse(scope, receive, send)
            return
        chunks, size = [], 0
        while True:
            message = await receive()
            if message["type"] != "http.request":
                return  # the client is gone
            chunk = message.get("body", b"")
            size += len(chunk)
            if size > self._limit:
                await self._refuse(scope, receive, send)
                return
            chunks.append(chunk)
            if not message.get("more_body", False):
                break
        body: Message | None = {"type": "http.request", "body": b"".join(chunks), "more_body": False}

        async def receive_again() -> Message:
            nonlocal body
            if body is None:
                return await receive()
            whole, body = body, None
            return whole

        await self._app(scope, receive_again, send)

    async def _refuse(self, scope: Scope, receive: Receive, send: Send) -> None:
        detail = (
            f"The body is longer than {self._limit} bytes; store the problem once and refer to its id, or send less."
        )
        # What is left of the body is not read, so the connection cannot be used again.
        response = problem_response("body-too-large", detail, headers={"Connection": "close"})
        await response(scope, receive, send)


class LastResort:
    """Answers a failure nobody foresaw with the error document, unless the answer has begun.

    The framework's own last resort stands outside all middleware: its answer would have no security headers
    and would not be counted.
    """

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one connection."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        has_begun = False

        async def send_and_note(message: Message) -> None:
            nonlocal has_begun
            has_begun = True
            await send(message)

        try:
            await self._app(scope, receive, send_and_note)
        except Exception as error:
            if has_begun:
                raise
            response = unforeseen_response(scope["method"], scope["path"], error)
            await response(scope, receive, send)


class SecurityHeaders:
    """Says to browsers what the pages may do: load from here alone, be framed nowhere."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one connection."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        state = scope.setdefault("state", {})

        async def send_with_headers(message: Message) -> None:
            if message["type"] == "http.response.start":
                headers = MutableHeaders(scope=message)
                headers["X-Content-Type-Options"] = "nosniff"
                headers["Referrer-Policy"] = "no-referrer"
                headers["Content-Security-Policy"] = _policy(state.get("script_source", ""))
            await send(message)

        await self._app(scope, receive, send_with_headers)


def _policy(script_source: str) -> str:
    """Plotly writes style attributes and draws downloads as data: images, hence the two exceptions."""
    return (
        f"default-src 'none'; script-src 'self'{' ' + script_source if script_source else ''}; connect-src "
        "'self'; style-src 'self' 'unsafe-inline'; img-src 'self' data: blob:; font-src 'self' data:; "
        "base-uri 'none'; form-action 'self'; frame-ancestors 'none'"
    )


class Counting:
    """Counts requests by their route, which has a bounded number of names."""

    def __init__(self, app: ASGIApp, count: Callable[[], Count]) -> None:
        self._app = app
        self._count = count

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one connection."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        started = time.perf_counter()
        status = 500

        async def send_and_note(message: Message) -> None:
            nonlocal status
            if message["type"] == "http.response.start":
                status = message["status"]
            await send(message)

        try:
            await self._app(scope, receive, send_and_note)
        finally:
            route = getattr(scope.get("route"), "path", "other")
            method = scope["method"] if scope["method"] in ("GET", "HEAD", "POST", "DELETE", "OPTIONS") else "other"
            self._count()(method, route, status, time.perf_counter() - started)
