"""Pages that were found as a file for other programs: CSV, or Parquet with a type for each column.

Rows are written as they come, so that a whole catalogue needs no more memory than a part of it.
"""

import csv
import io
import itertools
from collections.abc import Iterable, Sequence
from typing import IO, Any

from digitize import CAUTION
from digitize.errors import needs_extra
from measure.find import NUMBERS, WHOLE_NUMBERS

_ROWS_AT_ONCE = 50_000


def write_csv(file: IO[bytes], names: Sequence[str], rows: Iterable[Sequence[Any]]) -> None:
    """A table as CSV (RFC 4180, UTF-8), blank where a value is missing."""
    text = io.TextIOWrapper(file, encoding="utf-8", newline="", write_through=True)
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(names)
    writer.writerows(rows)
    text.detach()


def write_parquet(file: IO[bytes], names: Sequence[str], rows: Iterable[Sequence[Any]]) -> None:
    """A table as Apache Parquet: whole numbers, numbers and words, null where one is missing.

    Raises
    ------
    UnreadableFile
        The package that writes Parquet is not installed.
    """
    try:
        import pyarrow as pa
        import pyarrow.parquet
    except ImportError:
        raise needs_extra("writing Parquet", "parquet", "give --to csv") from None
    kinds = [
        pa.int64() if n in WHOLE_NUMBERS else pa.float64() if n in NUMBERS else pa.string()
        for n in names
    ]
    fields = [pa.field(name, kind) for name, kind in zip(names, kinds, strict=True)]
    schema = pa.schema(fields, metadata={"caution": CAUTION})
    with pyarrow.parquet.ParquetWriter(file, schema, compression="zstd") as writer:
        rest = iter(rows)
        while part := list(itertools.islice(rest, _ROWS_AT_ONCE)):
            columns = zip(*part, strict=True)
            arrays = [pa.array(c, kind) for c, kind in zip(columns, kinds, strict=True)]
            writer.write_batch(pa.record_batch(arrays, schema=schema))
