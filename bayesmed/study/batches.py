"""Data that come in batches, from a Parquet file or any source of frames that can be read more than once."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from bayesmed.core.errors import DataError
from bayesmed.study.frame import RowsUsed, given, plain_column, text_column, typed_column

BATCH = 50_000
KEPT = 20_000
"""At least so many rows, evenly spaced, stay in memory, and at most twice as many."""

PENDING = 4
"""Most batches that wait in an executor at once."""


@dataclass(frozen=True, eq=False)
class Batches:
    """Frames one after the other, each time from the start.

    Attributes
    ----------
    frames : callable
        Returns a new iterator of frames; takes the columns wanted, or None for all.
    names : tuple of str
        The columns.
    """

    frames: Callable[[Sequence[str] | None], Iterator[Any]]
    names: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class CompleteBatches:
    """The complete rows of batches, all in the types that the first pass found.

    Attributes
    ----------
    kept : DataFrame
        Rows evenly spaced over the whole.
    rows : RowsUsed
    text : frozenset of str
    unused_levels : dict of str to tuple
    """

    kept: pd.DataFrame
    rows: RowsUsed
    text: frozenset[str]
    unused_levels: Mapping[str, tuple[Any, ...]]
    _source: Batches
    _types: Mapping[str, Any]

    def frames(self) -> Iterator[pd.DataFrame]:
        """Yield the complete rows of one batch after the other."""
        for _, columns in _typed_batches(self._source, list(self._types)):
            whole = _whole(columns)
            if whole.any():
                yield pd.DataFrame({n: columns[n][whole].astype(t).array for n, t in self._types.items()})

    def whole(self, names: Sequence[str]) -> pd.DataFrame:
        """Return some columns of all complete rows: 8 bytes a row and column."""
        return pd.concat([frame[list(names)] for frame in self.frames()], ignore_index=True)


def batched(data: Any) -> Batches | None:
    """Return the batches that `data` stands for, or None if it is something else.

    Parameters
    ----------
    data : path of a Parquet file, a function that returns an iterator of frames, or a list of frames

    Raises
    ------
    DataError
        If it can be read once only, is no Parquet file, or has no batch.
    """
    if isinstance(data, str | Path):
        return _parquet(Path(data))
    if isinstance(data, Iterator):
        raise DataError(
            "data: an iterator can be read once only, and the rows are read twice: first for levels and transforms, "
            "then for the statistics. Give a function that returns a new iterator, a list of frames or a Parquet path."
        )
    if isinstance(data, list | tuple) and data and (isinstance(data[0], Mapping) or hasattr(data[0], "columns")):
        return _from(lambda: data)
    if callable(data) and not hasattr(data, "columns"):
        return _from(data)
    return None


def mapped(function: Callable[..., Any], arguments: Iterable[tuple[Any, ...]], executor: Executor | None) -> Any:
    """Yield the function of each tuple of arguments in order, in an executor if there is one."""
    if executor is None:
        yield from (function(*each) for each in arguments)
        return
    waiting: deque[Any] = deque()
    for each in arguments:
        waiting.append(executor.submit(function, *each))
        if len(waiting) >= PENDING:
            yield waiting.popleft().result()
    while waiting:
        yield waiting.popleft().result()


def complete_batches(source: Batches, names: Sequence[str]) -> CompleteBatches:
    """Make the first pass: types, levels, missing values and the rows kept.

    Raises
    ------
    DataError
        If a column has a type or value that cannot be used or changes its type, or no row is complete.
    """
    rows = used = 0
    stride = 1
    missing: dict[str, int] = {}
    kinds: dict[str, Any] = {}
    levels: dict[str, dict[Any, bool]] = {name: {} for name in names}
    text: set[str] = set()
    kept: list[pd.DataFrame] = []
    for seen_as_text, columns in _typed_batches(source, names):
        text |= seen_as_text
        whole = _whole(columns)
        rows += len(whole)
        for name, column in columns.items():
            if absent := int(column.isna().sum()):
                missing[name] = missing.get(name, 0) + absent
            column = column[whole]
            if isinstance(column.dtype, pd.CategoricalDtype):
                kind: Any = "ordered" if column.dtype.ordered else "category"
                present = set(column.cat.codes.unique())
                for code, level in enumerate(column.cat.categories):
                    levels[name][level] = levels[name].get(level, False) or code in present
            else:
                kind = plain_column(column).dtype if len(column) else None
            kinds[name] = _common(name, kinds.get(name), kind)
        frame = pd.DataFrame({n: c[whole].array for n, c in columns.items()})
        kept.append(frame.iloc[(-used) % stride :: stride])
        used += int(whole.sum())
        while sum(map(len, kept)) > 2 * KEPT:
            kept = [pd.DataFrame(pd.concat([f.astype(object) for f in kept], ignore_index=True)).iloc[::2]]
            stride *= 2
    if not used:
        raise DataError(f"data: no row of {rows} is complete in every column used.")
    types = {
        name: pd.CategoricalDtype(
            _ordered([k for k, here in levels[name].items() if here], name in text), kind == "ordered"
        )
        if isinstance(kind, str)
        else kind
        for name, kind in kinds.items()
    }
    unused = {n: tuple(sorted((k for k, here in found.items() if not here), key=str)) for n, found in levels.items()}
    whole_kept = pd.concat([f.astype(object) for f in kept], ignore_index=True).astype(types)
    return CompleteBatches(
        whole_kept,
        RowsUsed(rows, used, rows - used, missing),
        frozenset(text),
        {name: found for name, found in unused.items() if found and name not in text},
        source,
        types,
    )


def _ordered(levels: list[Any], is_text: bool) -> list[Any]:
    return sorted(levels) if is_text else levels


def _common(name: str, known: Any, kind: Any) -> Any:
    if known is None or kind is None or known == kind:
        return kind if known is None else known
    if {str(known), str(kind)} == {"int64", "float64"}:
        return np.dtype(float)
    raise DataError(f"data: column '{name}' is {known} in one batch and {kind} in another; give it one type.")


def _typed_batches(source: Batches, names: Sequence[str]) -> Iterator[tuple[set[str], dict[str, pd.Series[Any]]]]:
    for batch in source.frames(names):
        found = given(batch)
        lacking = [name for name in names if name not in found.names]
        if lacking:
            raise DataError(f"data: a batch has no column '{lacking[0]}', which the first one has.")
        frame = pd.DataFrame({name: found.column(name) for name in names}).reset_index(drop=True)
        text = {name for name in names if text_column(frame[name])}
        yield text, {name: typed_column(name, frame[name]) for name in names}


def _whole(columns: Mapping[str, pd.Series[Any]]) -> np.ndarray[Any, np.dtype[np.bool_]]:
    return np.asarray(~np.logical_or.reduce([np.asarray(column.isna()) for column in columns.values()]))


def _from(source: Any) -> Batches:
    again = source if callable(source) else (lambda: source)
    first = next(iter(again()), None)
    if first is None:
        raise DataError("data: there is no batch.")
    return Batches(lambda names: iter(again()), given(first).names)


def _parquet(path: Path) -> Batches:
    try:
        import pyarrow.parquet as pq
    except ImportError:
        raise DataError("data: to read Parquet install pyarrow: pip install 'bayesmed[parquet]'.") from None
    try:
        names = tuple(pq.ParquetFile(path).schema_arrow.names)
    except (OSError, ValueError) as error:
        raise DataError(f"data: {str(path)!r} cannot be read as a Parquet file: {error}") from None

    def frames(wanted: Sequence[str] | None) -> Iterator[Any]:
        with pq.ParquetFile(path, memory_map=False, pre_buffer=False) as file:
            for batch in file.iter_batches(BATCH, columns=None if wanted is None else list(wanted)):
                if batch.num_rows:
                    yield batch.to_pandas()

    return Batches(frames, names)
