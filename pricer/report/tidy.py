"""Frames of plain columns: text is ``""`` where there is none, numbers are NaN or NA, dates are dates."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import fields
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas

    Frame = pandas.DataFrame


def records(items: Sequence[Any], kind: type[Any], text: str = "", whole: str = "", dates: str = "") -> Frame:
    """A frame of instances of the dataclass ``kind``, one column a field; the other arguments as for :func:`frame`."""
    names = [f.name for f in fields(kind)]
    return frame({name: [getattr(item, name) for item in items] for name in names}, text=text, whole=whole, dates=dates)


def frame(columns: Mapping[str, Sequence[Any]], text: str = "", whole: str = "", dates: str = "") -> Frame:
    """A frame; ``text``, ``whole`` and ``dates`` name, between blanks, the columns that do not hold floats."""
    import pandas

    makers: dict[str, Callable[[Sequence[Any]], Any]] = dict.fromkeys(columns, numbers)
    makers.update(dict.fromkeys(text.split(), texts))
    makers.update(dict.fromkeys(whole.split(), lambda values: pandas.array(list(values), dtype="Int64")))
    makers.update(dict.fromkeys(dates.split(), lambda values: pandas.Series(values, dtype="datetime64[s]")))
    return pandas.DataFrame({name: makers[name](values) for name, values in columns.items()})


def texts(values: Sequence[Any]) -> pandas.Series:
    """A column of text."""
    import pandas

    return pandas.Series(["" if value is None else str(value) for value in values], dtype=object)


def numbers(values: Sequence[Any]) -> pandas.Series:
    """A column of floats."""
    import pandas

    return pandas.Series(values, dtype="float64")
