"""Progress of long work, told to whoever listens."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """Something that is told how far the work has come."""

    def start(self, total: int) -> None:
        """The work has ``total`` steps."""

    def advance(self, label: str) -> None:
        """One more step is done; ``label`` says which."""

    def finish(self) -> None:
        """No more steps will come."""


class Silent:
    """Progress that nobody watches."""

    def start(self, total: int) -> None:
        pass

    def advance(self, label: str) -> None:
        pass

    def finish(self) -> None:
        pass
