"""Parquet files: columns keep their stored types; rows are counted from 1."""

import io

import numpy as np
import pyarrow as pa
import pyarrow.parquet

from backtest.errors import DataError
from backtest.reading.csv_text import check_header


def parse_parquet(content: bytes, name: str) -> tuple[dict[str, pa.ChunkedArray], np.ndarray]:
    """Return the columns of a Parquet file and the number of every row, counted from 1.

    Dictionary-encoded columns are unfolded. Raises DataError where the bytes are no Parquet or a name is repeated.
    """
    try:
        table = pyarrow.parquet.read_table(io.BytesIO(content))
    except (pa.ArrowException, OSError) as error:
        remedy = "Write the file again, or name it .csv if it is text."
        first_line = str(error).split("\n", 1)[0]
        raise DataError("the file is not readable Parquet", value=first_line, place=name, remedy=remedy) from None
    check_header(table.column_names, name)
    columns = {column: _unfolded(table[column]) for column in table.column_names}
    return columns, np.arange(1, table.num_rows + 1)


def _unfolded(column: pa.ChunkedArray) -> pa.ChunkedArray:
    return column.cast(column.type.value_type) if pa.types.is_dictionary(column.type) else column
