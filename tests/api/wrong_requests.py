"""A wrong request with what it has to be answered, and the check that it is."""

from __future__ import annotations

from dataclasses import dataclass

import httpx

from tests.api.client import check_problem_document

JSON_TYPE = {"Content-Type": "application/json"}


@dataclass(frozen=True)
class Wrong:
    """One wrong request. pointer: the field at fault, or None. sentence: part of what is said about it."""

    name: str
    path: str
    content: bytes
    status: int
    pointer: str | None
    sentence: str
    headers: tuple[tuple[str, str], ...] = ()


async def check_wrong(client: httpx.AsyncClient, wrong: Wrong) -> None:
    """Fail unless the request is answered with one sentence, that one, about that field."""
    headers = JSON_TYPE | dict(wrong.headers)
    answer = await client.post(wrong.path, content=wrong.content, headers=headers)
    document = check_problem_document(answer, wrong.status)
    said = {error["pointer"]: error["detail"] for error in document.get("errors", [])}
    if wrong.pointer is None:
        sentences = [document["detail"], *said.values()]
        assert any(wrong.sentence in sentence for sentence in sentences), sentences
    else:
        assert wrong.pointer in said, said
        assert wrong.sentence in said[wrong.pointer]
        assert len(said) == 1, said
