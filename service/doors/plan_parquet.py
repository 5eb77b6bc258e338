"""A table of a plan as Parquet: exact numbers as decimals, texts as texts.

An amount is ``decimal128(38, 12)``, always the same type, so that the files of many runs are one
data set. A column with a number that does not fit (a third of a pallet, more than 12 decimals, or
``unknown``) is text as a whole, as in JSON.
"""

import re
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import orjson

from service.doors.plan_tables import AMOUNTS, COLUMNS, WHOLE, table_rows

if TYPE_CHECKING:
    import pyarrow as pa

DECIMALS: Final = 12
_FITS: Final = re.compile(r"-?[0-9]{1,26}(?:\.[0-9]{1,12})?")
# What the file says of the plan that it belongs to.
_SAID: Final = ("network_digest", "options_digest", "currency", "total_cost", "status")


def write_parquet(plan: Mapping[str, Any], table: str, path: Path) -> None:
    """Write one table of ``plan``, a key of ``COLUMNS``, to ``path``."""
    import pyarrow as pa  # noqa: PLC0415 - loads when such a file is written
    import pyarrow.parquet as pq  # noqa: PLC0415 - likewise

    rows = table_rows(plan, table)
    columns = {name: _column(table, name, rows) for name in COLUMNS[table]}
    said = {name: str(plan[name]) for name in _SAID if plan.get(name) is not None}
    data = pa.table(list(columns.values()), names=list(columns))
    pq.write_table(data.replace_schema_metadata(said), path, compression="zstd")


def _column(table: str, name: str, rows: Sequence[Mapping[str, Any]]) -> "pa.Array":
    """Return one column."""
    import pyarrow as pa  # noqa: PLC0415 - see above

    values = [row.get(name) for row in rows]
    if name in WHOLE:
        return pa.array(values, pa.int64())
    if table == "shortages" and name == "kept":
        return pa.array(values, pa.bool_())
    texts = [
        value if value is None or isinstance(value, str) else orjson.dumps(value).decode()
        for value in values
    ]
    column = pa.array(texts, pa.string())
    if name in AMOUNTS[table] and all(text is None or _FITS.fullmatch(text) for text in texts):
        return column.cast(pa.decimal128(38, DECIMALS))
    return column
