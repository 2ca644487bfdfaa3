"""The table as a NumPy archive: `names`, `units`, `meanings`, `between`, `rows`, and no pickled object."""

from __future__ import annotations

import io

import numpy as np

from web.tables.sampling import Table


def to_npz(table: Table) -> bytes:
    """Reads with `numpy.load(file)`; `rows` has the shape (rows, columns), `record` the shape (lines, 2)."""
    buffer = io.BytesIO()
    np.savez(
        buffer,
        allow_pickle=False,
        names=np.array([column.name for column in table.columns]),
        units=np.array([column.unit for column in table.columns]),
        meanings=np.array([column.meaning for column in table.columns]),
        between=np.array([column.between for column in table.columns]),
        rows=table.rows,
        **{text.member: np.array(text.cells, dtype=str) for text in table.texts},
        record=np.array(table.record, dtype=str).reshape(-1, 2),
        title=np.array(table.title),
        caution=np.array(table.caution),
    )
    return buffer.getvalue()
