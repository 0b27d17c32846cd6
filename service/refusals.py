"""Why the service turns a request away, in its own words; the solver's reasons are in service/core/errors.py.

Refusal
├── MalformedBody         the body is not JSON as it has to be
├── UnsupportedMediaType  the body is of another kind than JSON
├── BodyTooLarge          the body is longer than the limit
├── NotAcceptable         no form of the answer that the client accepts
├── RequestRefused        fields of the request that cannot be used, each with a sentence
├── UnknownProblem        no problem is stored under this id
├── TooCostly             the work or the answer would pass a limit; known before it starts
├── QueueFull             all workers are busy and no one more may wait
├── StoreBusy             the file of stored problems or studies is held by another process, or damaged
├── StoreFull             no room for another problem or study
├── UnknownStudy          no study is known under this id
└── WrongState            the study is not in the state that this takes
"""

from __future__ import annotations

from dataclasses import dataclass

Path = tuple[str | int, ...]


@dataclass(frozen=True)
class Issue:
    """What is wrong with one field. path: keys and indices from the top of the request body."""

    path: Path
    detail: str
    code: str


class Refusal(Exception):
    """Base of the service's own reasons. The message is a sentence for the client."""

    def __init__(self, detail: str, issues: tuple[Issue, ...] = ()) -> None:
        super().__init__(detail)
        self.detail = detail
        self.issues = issues


class MalformedBody(Refusal):
    """The body is empty, no JSON, or JSON that can be read in more than one way."""


class UnsupportedMediaType(Refusal):
    """The body says it is something other than plain JSON."""


class BodyTooLarge(Refusal):
    """The body is longer than the limit."""


class NotAcceptable(Refusal):
    """The client accepts no form in which the answer can be given."""


class RequestRefused(Refusal):
    """Fields that cannot be used, each with a sentence."""

    def __init__(self, issues: tuple[Issue, ...]) -> None:
        count = "One field" if len(issues) == 1 else f"{len(issues)} fields"
        super().__init__(f"{count} of the request cannot be used; see `errors`.", issues)


class UnknownProblem(Refusal):
    """No problem is stored under this id."""


class TooCostly(Refusal):
    """An estimate passes a limit. estimate, limit: both in the unit that the message names."""

    def __init__(self, detail: str, estimate: float, limit: float, issues: tuple[Issue, ...] = ()) -> None:
        super().__init__(detail, issues)
        self.estimate = estimate
        self.limit = limit


class QueueFull(Refusal):
    """All workers are busy and no one more may wait."""

    def __init__(self, detail: str, retry_after_seconds: int) -> None:
        super().__init__(detail)
        self.retry_after_seconds = retry_after_seconds


class StoreBusy(Refusal):
    """The file of stored problems or studies is held by another process, or damaged.

    passes: whether it may be reached later without anybody's doing.
    """

    retry_after_seconds = 5

    def __init__(self, detail: str, *, passes: bool = True) -> None:
        super().__init__(detail)
        self.passes = passes


class StoreFull(Refusal):
    """No room for another problem or study."""


class UnknownStudy(Refusal):
    """No study is known under this id."""


class WrongState(Refusal):
    """The study is not in the state that this takes."""
