"""Reading a request body: JSON that can be read in one way only.

The standard reader takes NaN, keys that stand twice and texts that are no Unicode; each would fail later or
be decided silently, so they are refused here. `StrictJsonRoute` gives the framework what this module read.
"""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Callable, Coroutine
from email.message import Message
from typing import Any, NoReturn

from fastapi import Request, Response
from fastapi.routing import APIRoute

from service.refusals import MalformedBody, UnsupportedMediaType

_SURROGATE_ESCAPE = re.compile(r"\\u[dD][89abAB]|\\u[dD][c-fC-F]")
_LONGEST_KEY_SHOWN = 40

# No object of any request has a third as many keys; each unknown one would cost a sentence.
MOST_KEYS = 100


def parse_json(raw: bytes) -> Any:
    """The JSON value of a body.

    Raises MalformedBody with a sentence for anything that is not one plain JSON value.
    """
    if not raw.strip():
        raise MalformedBody("The body is empty; a JSON object is wanted.")
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise MalformedBody(f"The body is not UTF-8: byte {error.start} cannot be read.") from None
    try:
        value = json.loads(text, object_pairs_hook=_object, parse_constant=_refuse_constant)
        if _SURROGATE_ESCAPE.search(text):
            json.dumps(value, ensure_ascii=False).encode()
    except json.JSONDecodeError as error:
        raise MalformedBody(
            f"The body is not JSON at line {error.lineno}, column {error.colno}: {_expected(error)}."
        ) from None
    except RecursionError:
        raise MalformedBody("The body is nested too deeply.") from None
    except UnicodeEncodeError:
        raise MalformedBody("A text in the body has half a surrogate pair, which is no Unicode.") from None
    except ValueError:
        # Python reads no whole number of more than 4300 digits.
        raise MalformedBody("A number in the body has too many digits.") from None
    return value


def _expected(error: json.JSONDecodeError) -> str:
    return error.msg[:1].lower() + error.msg[1:]


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    if len(pairs) > MOST_KEYS:
        raise MalformedBody(f"An object in the body has {len(pairs)} keys; no object here has more than {MOST_KEYS}.")
    value = dict(pairs)
    if len(value) != len(pairs):
        seen: set[str] = set()
        for key, _ in pairs:
            if key in seen:
                shown = json.dumps(key[:_LONGEST_KEY_SHOWN])
                raise MalformedBody(f"The key {shown} stands twice in one object; keep one of them.")
            seen.add(key)
    return value


def _refuse_constant(name: str) -> NoReturn:
    raise MalformedBody(f"{name} is not a JSON number; give a finite number or leave the field out.")


def check_media_type(request: Request) -> None:
    """Raise UnsupportedMediaType unless the body says it is application/json in UTF-8, not compressed."""
    encoding = request.headers.get("content-encoding", "identity").strip().lower()
    if encoding not in ("", "identity"):
        raise UnsupportedMediaType("Compressed bodies are not read; send the JSON as it is.")
    header = Message()
    header["content-type"] = request.headers.get("content-type", "")
    charset = header.get_param("charset", "utf-8")
    if header.get_content_type() != "application/json" or not isinstance(charset, str):
        raise UnsupportedMediaType("The body has to be sent with the header Content-Type: application/json.")
    if charset.lower() not in ("utf-8", "utf8", "us-ascii"):
        raise UnsupportedMediaType("The body has to be encoded in UTF-8.")


class StrictJsonRequest(Request):
    """A request whose JSON was read by `parse_json`."""

    strict_json: Any = None

    async def json(self) -> Any:
        """The value that was read before the route was called."""
        return self.strict_json


Handler = Callable[[Request], Coroutine[Any, Any, Response]]


class StrictJsonRoute(APIRoute):
    """A route that reads its body strictly."""

    def get_route_handler(self) -> Handler:
        """The handler of the framework with the strict reading before it."""
        handle = super().get_route_handler()
        if not self.body_field:
            return handle

        async def read_and_handle(request: Request) -> Response:
            check_media_type(request)
            raw = await request.body()
            request.state.body_digest = hashlib.sha256(raw).hexdigest()
            kept = self.answered_before(request)
            if kept is not None:
                return kept
            strict = StrictJsonRequest(request.scope, request.receive)
            strict._body = raw  # what Starlette itself keeps after reading
            strict.strict_json = parse_json(raw)
            return await handle(strict)

        return read_and_handle

    def answered_before(self, request: Request) -> Response | None:
        """An answer that needs no work; none unless a route keeps answers.

        `request.state.body_digest` is set.
        """
        return None
