"""QuantLib's global evaluation date, borrowed for a moment and put back."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import date

import QuantLib as ql  # noqa: N813 - the short name of QuantLib's own examples

from pricer.market.calendars import to_quantlib

_LOCK = threading.RLock()


@contextmanager
def evaluation_date(day: date) -> Iterator[None]:
    """Within the block QuantLib's evaluation date is ``day``; one thread at a time.

    QuantLib's bootstraps date their quotes by a global setting. Its objects change again when
    that is put back, so nothing but plain numbers and dates may leave the block.
    """
    with _LOCK:
        settings = ql.Settings.instance()
        before = settings.evaluationDate
        settings.evaluationDate = to_quantlib(day)
        try:
            yield
        finally:
            if before == ql.Date.todaysDate():
                settings.resetEvaluationDate()  # unset reads as today; setting today would stop it at midnight
            else:
                settings.evaluationDate = before
