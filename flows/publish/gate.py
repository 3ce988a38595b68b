"""The gate: no release passes that breaks a promise, and none whose promises could not be tested.

Great Expectations reads the whole tables once a night, in a context that lives in memory and leaves nothing behind. A test that crashed is
told apart from data that failed it. Which rows fail is read from a mask: the engine lists them one by one, which takes it minutes.
"""

from __future__ import annotations

import logging
import warnings
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from flows.publish.promises import promises

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    import pandas as pd

    from flows.publish.promises import Promise

_SHOWN = 10


@dataclass(frozen=True, slots=True)
class Answer:
    """A promise that was put to the test: how many ``rows`` it speaks of, how many are ``failing`` and the first of them by name.

    ``crashed`` says what went wrong where the test itself did; the promise then counts as broken.
    """

    table: str
    promise: str
    rows: int
    failing: int
    examples: tuple[str, ...] = ()
    crashed: str | None = None

    @property
    def kept(self) -> bool:
        """Whether every row keeps the promise, and the test ran to its end."""
        return self.failing == 0 and self.crashed is None

    def problem(self) -> str:
        """Return what is wrong as a sentence."""
        if self.crashed is not None:
            return f"{self.table}: the test of {self.promise!r} did not run: {self.crashed}"
        more = f" and {self.failing - len(self.examples)} more" if self.failing > len(self.examples) else ""
        return f"{self.table}: {self.failing} of {self.rows} rows break {self.promise!r}: {'; '.join(self.examples)}{more}"


def answers(tables: Mapping[str, pd.DataFrame]) -> list[Answer]:
    """Return every promise about the seven tables, tested."""
    with _quiet_engine() as engine:
        return [_answer(engine, promise) for promise in promises(tables)]


def _answer(engine: Any, promise: Promise) -> Answer:  # noqa: ANN401  (the engine's own type)
    import great_expectations as gx  # noqa: PLC0415  (3 s; only a night needs it)

    rows = len(promise.view)
    failing = promise.view[promise.broken.to_numpy(dtype=bool)]
    examples = tuple(", ".join(f"{column} {row[column]!s}" for column in promise.key) for _, row in failing.head(_SHOWN).iterrows())
    try:
        expectation = getattr(gx.expectations, promise.expectation)(**promise.arguments)
        batch = engine.get_batch({"dataframe": promise.view.reset_index(drop=True)})
        answer = batch.validate(expectation, result_format="BOOLEAN_ONLY")
    except Exception as failure:  # noqa: BLE001  (whatever broke the test, the release must not pass)
        return Answer(promise.table, promise.sentence, rows, len(failing), examples, f"{type(failure).__name__}: {failure}")
    crashed = _crash(answer.exception_info)
    if crashed is None and bool(answer.success) != failing.empty:
        crashed = f"the engine says {'kept' if answer.success else 'broken'}, the mask marks {len(failing)} rows"
    return Answer(promise.table, promise.sentence, rows, len(failing), examples, crashed)


def _crash(exception_info: Any) -> str | None:  # noqa: ANN401  (flat, or one a metric)
    if not exception_info:
        return None
    infos = [exception_info] if "raised_exception" in exception_info else list(exception_info.values())
    raised = [str(info.get("exception_message")) for info in infos if info.get("raised_exception")]
    return "; ".join(raised) or None


@contextmanager
def _quiet_engine() -> Iterator[Any]:
    """Yield what takes a table and tests it: in memory, no progress bars, no messages home; leftovers in the temporary folder removed."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # its import uses deprecated modules; what its users do is still reported
        import great_expectations as gx  # noqa: PLC0415  (3 s; only a night needs it)
        from great_expectations.data_context.types.base import ProgressBarsConfig  # noqa: PLC0415

    # Some of its loggers set their own level, so only cutting them off keeps its chatter out of a night's output.
    logger = logging.getLogger("great_expectations")
    logger.propagate = False
    logger.addHandler(logging.NullHandler())
    context = gx.get_context(mode="ephemeral")
    context.enable_analytics(enable=False)
    context.variables.progress_bars = ProgressBarsConfig(globally=False, metric_calculations=False)
    try:
        yield context.data_sources.add_pandas("release").add_dataframe_asset("view").add_batch_definition_whole_dataframe("view")
    finally:
        for site in list(context.get_site_names()):
            context.delete_data_docs_site(site)
