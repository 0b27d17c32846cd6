"""Waiting for the store of studies where it cannot be reached: a full disk or a backup costs a study time, no work."""

from __future__ import annotations

import logging
import time
from collections.abc import Callable
from typing import ParamSpec, TypeVar

from service.refusals import StoreBusy

Given = ParamSpec("Given")
Outcome = TypeVar("Outcome")

logger = logging.getLogger("service")

# How soon a store that could not be reached is asked again.
RETRY_SECONDS = 1.0


def patiently(
    ask_on: Callable[[], None], action: Callable[Given, Outcome], *args: Given.args, **kwargs: Given.kwargs
) -> Outcome:
    """What an action of the store comes to, which is tried until the store can be reached.

    ask_on: asked between tries; what it raises ends them. Raises StoreBusy where waiting is of no use.
    """
    is_told = False
    while True:
        try:
            return action(*args, **kwargs)
        except StoreBusy as error:
            if not error.passes:
                raise
            if not is_told:
                logger.warning("The store of studies cannot be reached (%s); a study waits for it.", error.__cause__)
                is_told = True
        ask_on()
        time.sleep(RETRY_SECONDS)
