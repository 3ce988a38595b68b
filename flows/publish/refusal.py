"""A release that was refused: nothing was published, and what stood stays."""

from __future__ import annotations

from collections.abc import Sequence


class GateRefused(Exception):  # noqa: N818  (a refusal is an outcome with reasons, not a fault of the program)
    """Tables that break a promise; ``problems`` are sentences that name table, column and rows."""

    def __init__(self, problems: Sequence[str]) -> None:
        """Hold the problems, worst first."""
        self.problems = tuple(problems)
        super().__init__("; ".join(self.problems))

    def __reduce__(self) -> tuple[object, ...]:
        """Let the refusal cross a process boundary whole."""
        return GateRefused, (self.problems,)
