"""Where the batch command reads from and writes to: files, standard streams, Parquet at the edges.

Parquet goes through the same text as CSV does, so that both give the same numbers: a Parquet input is written out as
CSV first, a Parquet output made from the finished CSV, with the types of the input kept.
"""

from __future__ import annotations

import os
import shutil
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

import pyarrow as pa
import pyarrow.compute as pc
from pyarrow import csv as arrow_csv

from .batch_cells import NUMBERS, BatchError, Problem

_COPIED = 1 << 20


@dataclass(frozen=True)
class Source:
    """An input on disk that can be read twice, and the types of its columns where it states them."""

    data: BinaryIO
    types: dict[str, pa.DataType]


@contextmanager
def reading(source: str) -> Iterator[Source]:
    """The input. Standard input is copied first, because it may have to be read twice."""
    if _is_parquet(source):
        with tempfile.TemporaryFile() as data:
            types = _parquet_to_csv(source, data)
            data.seek(0)
            yield Source(data, types)
    elif source != "-":
        with open(source, "rb") as data:
            yield Source(data, {})
    else:
        with tempfile.TemporaryFile() as data:
            shutil.copyfileobj(sys.stdin.buffer, data, _COPIED)
            data.seek(0)
            yield Source(data, {})


@contextmanager
def writing(target: str, derived: dict[str, pa.DataType], source: Source) -> Iterator[BinaryIO]:
    """A file that takes the place of the target only when all went well."""
    if target == "-":
        with tempfile.TemporaryFile() as out:
            yield out
            out.seek(0)
            shutil.copyfileobj(out, sys.stdout.buffer, _COPIED)
            sys.stdout.buffer.flush()
    elif _is_parquet(target):
        with tempfile.TemporaryFile() as text:
            yield text
            text.seek(0)
            with _beside(target) as out:
                _csv_to_parquet(text, out, dict.fromkeys(NUMBERS, pa.float64()) | derived | source.types)
    else:
        with _beside(target) as out:
            yield out


@contextmanager
def _beside(target: str) -> Iterator[BinaryIO]:
    place = Path(target)
    if not place.parent.is_dir():
        raise FileNotFoundError(2, "there is no such folder", str(place.parent))
    descriptor, name = tempfile.mkstemp(dir=place.parent, prefix=f".{place.name}.", suffix=".part")
    try:
        with open(descriptor, "wb+") as out:
            yield out
            out.flush()
            os.fsync(out.fileno())
        mask = os.umask(0)
        os.umask(mask)
        os.chmod(name, 0o666 & ~mask)
        os.replace(name, place)
    finally:
        Path(name).unlink(missing_ok=True)


def _is_parquet(name: str) -> bool:
    return Path(name).suffix.casefold() in (".parquet", ".pq")


def _parquet_to_csv(source: str, out: BinaryIO) -> dict[str, pa.DataType]:
    """Write a Parquet file as CSV, batch by batch; returns the types of its columns."""
    from pyarrow import parquet

    try:
        with parquet.ParquetFile(source) as file:
            plain = pa.schema([(field.name, _plain(field.type)) for field in file.schema_arrow])
            with arrow_csv.CSVWriter(out, plain) as writer:
                for batch in file.iter_batches():
                    writer.write_table(_without_nan(pa.Table.from_batches([batch]).cast(plain)))
    except (pa.ArrowInvalid, pa.ArrowNotImplementedError, pa.ArrowTypeError) as error:
        raise BatchError(
            [Problem(1, "", f"not a Parquet table of plain columns ({str(error).splitlines()[0]})")]
        ) from None
    return {field.name: field.type for field in plain}


def _plain(kind: pa.DataType) -> pa.DataType:
    return kind.value_type if pa.types.is_dictionary(kind) else kind


def _without_nan(table: pa.Table) -> pa.Table:
    """NaN, as data frames write what is missing, is an empty cell."""
    for i, field in enumerate(table.schema):
        if pa.types.is_floating(field.type):
            column = table.column(i)
            table = table.set_column(i, field, pc.if_else(pc.is_nan(column), pa.scalar(None, field.type), column))
    return table


def _csv_to_parquet(text: BinaryIO, out: BinaryIO, types: dict[str, pa.DataType]) -> None:
    """Write the finished CSV as Parquet, block by block; a column without a stated type is text."""
    from pyarrow import parquet

    names = arrow_csv.open_csv(text, convert_options=arrow_csv.ConvertOptions(column_types={})).schema.names
    text.seek(0)
    reader = arrow_csv.open_csv(
        text,
        parse_options=arrow_csv.ParseOptions(newlines_in_values=True),
        convert_options=arrow_csv.ConvertOptions(
            column_types={name: types.get(name, pa.string()) for name in names},
            null_values=[""], strings_can_be_null=True, quoted_strings_can_be_null=False,
        ),
    )  # fmt: skip
    with parquet.ParquetWriter(out, reader.schema) as writer:
        for batch in reader:
            writer.write_batch(batch)
