"""The one shape of every complaint about input: which file, which field, which value, and what to do about it."""

from __future__ import annotations


class InputError(Exception):
    """Input that cannot be used as it is."""

    def __init__(self, problem: str, *, file: str, field: str | None = None, value: object = None, remedy: str = "") -> None:
        """Hold what is wrong (``problem``), where (``file``, ``field``, ``value``) and the ``remedy``."""
        self.problem, self.file, self.field, self.value, self.remedy = problem, file, field, value, remedy
        super().__init__(str(self))

    def __str__(self) -> str:
        """Return one sentence: file, field, problem, value, remedy."""
        where = self.file if self.field is None else f"{self.file}: {self.field}"
        found = "" if self.value is None else f" (found {str(self.value)[:80]!r})"
        remedy = f" {self.remedy}" if self.remedy else ""
        return f"{where}: {self.problem}{found}.{remedy}"

    def __reduce__(self) -> tuple[object, ...]:
        """Let the error cross a process boundary whole."""
        return _rebuild, (self.problem, self.file, self.field, self.value, self.remedy)


def _rebuild(problem: str, file: str, field: str | None, value: object, remedy: str) -> InputError:
    return InputError(problem, file=file, field=field, value=value, remedy=remedy)
