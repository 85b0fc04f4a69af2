"""How commands that run together find each other: the shared pass, if there is one in this context."""

from __future__ import annotations

from collections.abc import Sequence
from contextvars import ContextVar
from typing import Any, Protocol


class SharedPass(Protocol):
    """What a command meets instead of a walk of its own; see :mod:`earthwork.quantities.one_pass`."""

    def ground(self, site: Any) -> Any:
        """The site's ground, opened once for all commands; None for another site."""

    def walk(self, stack: Any, tallies: Sequence[Any]) -> None:
        """Count the tallies in the next pass over the ground, and come back when they are counted."""


SHARED: ContextVar[SharedPass | None] = ContextVar("earthwork_shared_pass", default=None)
