"""Cycles on disk: Parquet, appended block by block, whole or absent."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np

from .table import KIND_WORDS, CycleTable


class CycleWriter:
    """Appends :class:`CycleTable` blocks to one Parquet file.

    The file gets its name when the writer closes without an error; until then it is
    a temporary one beside it.
    """

    def __init__(self, path, signal_names, phases):
        self._path = Path(path)
        self._temporary = self._path.with_name(self._path.name + ".part")
        self._signals, self._phases = list(signal_names), list(phases)
        self._writer = None
        self._waiting: list[CycleTable] = []
        self.cycles = 0

    def __enter__(self):
        import pyarrow as pa
        import pyarrow.parquet as pq

        word = pa.dictionary(pa.int16(), pa.string())
        self._schema = pa.schema([
            ("signal", word), ("kind", word), ("phase", word), ("count", pa.float64()), ("range_k", pa.float32()), ("mean_c", pa.float32()),
            ("min_c", pa.float32()), ("max_c", pa.float32()), ("heating_s", pa.float32()), ("start_s", pa.float64()), ("end_s", pa.float64())])
        self._writer = pq.ParquetWriter(self._temporary, self._schema, compression="zstd")
        return self

    def __call__(self, table: CycleTable) -> None:
        """Add a block."""
        if not len(table):
            return
        self._waiting.append(table)
        self.cycles += len(table)
        if sum(len(t) for t in self._waiting) > 200_000:
            self._flush()

    def _flush(self):
        import pyarrow as pa

        if not self._waiting:
            return
        t = CycleTable.concat(self._waiting)
        self._waiting = []

        def words(index, names):
            return pa.DictionaryArray.from_arrays(pa.array(index.astype(np.int16)), pa.array(names, pa.string()))

        self._writer.write_table(pa.table([
            words(t.signal, self._signals), words(t.kind, KIND_WORDS), words(t.phase_id, self._phases), pa.array(t.count),
            *(pa.array(getattr(t, n).astype(np.float32)) for n in ("range_k", "mean_c", "min_c", "max_c", "heating_s")),
            pa.array(t.start_s), pa.array(t.end_s)], schema=self._schema))

    def __exit__(self, kind, error, trace):
        try:
            try:
                if kind is None:
                    self._flush()
            finally:
                self._writer.close()
            if kind is None:
                os.replace(self._temporary, self._path)
        finally:
            self._temporary.unlink(missing_ok=True)  # gone already where all went well
        return False
