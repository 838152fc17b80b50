"""A parquet file as a table of text cells; needs pyarrow, which is an extra."""

from __future__ import annotations

import io
from typing import Any

from gradeline.loader.cells import Cells, cells_of
from gradeline.loader.ledger import CONTROL, Ledger
from gradeline.loader.workbook import cell_text

__all__ = ["read_parquet"]

_LARGEST_UNPACKED = 1_000_000_000
_MOST_CELLS = 20_000_000


def read_parquet(ledger: Ledger, name: str, *, required: bool = True) -> Cells | None:
    """Return a parquet file of the survey as cells, None (with its problems noted) where that fails.

    Row 1 is the first row of data, as the format has no row for headings.
    """
    content = ledger.content_of(name, required=required)
    if content is None:
        return None
    try:
        import pyarrow as pa  # noqa: PLC0415 (loaded when asked for: start-up time)
        from pyarrow import parquet  # noqa: PLC0415 (loaded when asked for: start-up time)
    except ImportError:
        ledger.problem(
            name,
            None,
            None,
            "parquet files need pyarrow, which is not installed; run pip install 'gradeline[parquet]', or save the "
            "table as csv",
        )
        return None
    try:
        table = _bounded(ledger, name, content, parquet)
    except (pa.ArrowException, OSError, ValueError) as error:
        said = str(error).splitlines()[0] if str(error) else "damaged"
        ledger.problem(name, None, None, f"the file cannot be read as parquet ({said}); write it again")
        return None
    if table is None:
        return None
    columns = [[cell_text(value) for value in column.to_pylist()] for column in table.columns]
    for heading, column in zip(table.column_names, columns, strict=True):
        for row, cell in enumerate(column, start=1):
            found = CONTROL.search(cell)
            if found:
                rule = f"the character U+{ord(found[0]):04X} is not printable; take it out of the cell"
                ledger.problem(name, row, heading, rule)
    rows = [list(row) for row in zip(*columns, strict=True)]
    kept = [(line, row) for line, row in enumerate(rows, start=1) if any(row)]
    return cells_of(
        ledger,
        name,
        [list(table.column_names), *(row for _, row in kept)],
        [None, *(line for line, _ in kept)],
    )


def _bounded(ledger: Ledger, name: str, content: bytes, parquet: Any) -> Any:
    """The table, None (with a problem noted) where it holds more than a survey can.

    What it unpacks to stands in its directory, but for texts, which are written once and pointed at: they are read so,
    and their length is summed before they are spelled out.
    """
    from pyarrow import compute, types  # noqa: PLC0415 (loaded when asked for: start-up time)

    described = parquet.ParquetFile(io.BytesIO(content)).metadata
    nested = [field.name for field in described.schema.to_arrow_schema() if types.is_nested(field.type)]
    for heading in nested:
        ledger.problem(name, None, heading, "the column holds lists or tables; write one value a cell")
    unpacked = sum(described.row_group(i).total_byte_size for i in range(described.num_row_groups))
    cells = described.num_rows * described.num_columns
    if nested:
        return None
    if unpacked <= _LARGEST_UNPACKED and cells <= _MOST_CELLS:
        leaves = [described.schema.column(i) for i in range(described.num_columns)]
        texts = [leaf.path for leaf in leaves if leaf.physical_type == "BYTE_ARRAY"]
        table = parquet.ParquetFile(io.BytesIO(content), read_dictionary=texts).read()
        unpacked += sum(
            compute.sum(compute.binary_length(chunk.dictionary).take(chunk.indices)).as_py() or 0
            for column in table.columns
            for chunk in column.chunks
            if types.is_dictionary(chunk.type) and _is_text(chunk.dictionary.type, types)
        )
        if unpacked <= _LARGEST_UNPACKED:
            return table
    ledger.problem(
        name,
        None,
        None,
        f"the table unpacks to {unpacked // 10**6} MB in {cells} cells, more than {_LARGEST_UNPACKED // 10**6} MB or "
        f"{_MOST_CELLS} cells; split the survey",
    )
    return None


def _is_text(kind: Any, types: Any) -> bool:
    return any(
        check(kind)
        for check in (types.is_string, types.is_large_string, types.is_binary, types.is_large_binary)
    )
