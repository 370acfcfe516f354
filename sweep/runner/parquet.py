"""Tables of points as Parquet files: units in the column metadata, checksums on every page."""

import io
from pathlib import Path

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from sweep.base.errors import SurroundingsError
from sweep.base.units import si_unit
from sweep.plant import responses
from sweep.study.model import Study

_KINDS = {"float": pa.float64(), "text": pa.string(), "bool": pa.bool_(), "int": pa.int64()}


def schema_of(study: Study, inputs: tuple[str, ...]) -> pa.Schema:
    """Return the columns of a study's table of points, each with its unit."""
    fields = [pa.field("index", pa.int64(), metadata={"unit": ""})]
    for name in inputs:
        unit = si_unit(study.dimensions[study.paths_of(name)[0]])
        fields.append(pa.field(name, pa.float64(), metadata={"unit": unit}))
    for response in responses(study):
        fields.append(pa.field(response.column, _KINDS[response.kind], metadata={"unit": response.unit}))
    return pa.schema(fields, metadata={"study": study.digest, "schema": "1"})


def to_bytes(table: pd.DataFrame, schema: pa.Schema) -> bytes:
    """Return a table, its index as the column `index`, as the bytes of a Parquet file."""
    arrays = [pa.array(table.index.to_numpy(copy=True), pa.int64())]
    arrays += [pa.array(table[field.name], field.type, from_pandas=True) for field in list(schema)[1:]]
    sink = io.BytesIO()
    floats = [field.name for field in schema if field.type == pa.float64()]
    pq.write_table(
        pa.Table.from_arrays(arrays, schema=schema), sink, compression="zstd", use_dictionary=False, write_page_checksum=True,
        use_byte_stream_split=floats, write_statistics=False,
    )  # fmt: skip
    return sink.getvalue()


def from_bytes(data: bytes, path: Path) -> pd.DataFrame:
    """Return the table in the bytes of a Parquet file; SurroundingsError, naming its path, where it is damaged."""
    try:
        table = pq.read_table(io.BytesIO(data), page_checksum_verification=True)
    except (OSError, pa.ArrowException) as error:
        raise SurroundingsError(f"{path} is damaged: {error}; `sweep run` computes it again") from None
    frame: pd.DataFrame = table.to_pandas(types_mapper={pa.int64(): pd.Int64Dtype(), pa.bool_(): pd.BooleanDtype()}.get).set_index("index")
    return frame
