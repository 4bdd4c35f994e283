"""Whether a GeoTIFF's blocks lie inside its file: what is cut short is found and named."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any, NamedTuple

from mapper.errors import FileFormatError

MOST_CHECKED = 4096
"""Blocks looked up when a file is opened; of a larger file only the last ones."""


class Block(NamedTuple):
    """A tile or strip: its place among the blocks, and where its bytes lie in the file."""

    row: int
    col: int
    offset: int
    size: int


def refuse_cut_file(dataset: Any, band: int, *, where: str) -> None:
    """Refuse a file of which a block ends beyond the file's end.

    Raises FileFormatError that names the block, its rows and its offset.
    """
    length = Path(dataset.name).stat().st_size
    n_rows, n_cols = _block_counts(dataset, band)
    first = max(0, n_rows * n_cols - MOST_CHECKED)
    for number in range(first, n_rows * n_cols):
        block = find_block(dataset, band, *divmod(number, n_cols))
        if block is not None and block.offset + block.size > length:
            raise cut_short(dataset, band, block, where=where)


def find_block(dataset: Any, band: int, row: int, col: int) -> Block | None:
    """Where a block's bytes lie, or None for one that was never written."""
    offset = dataset.get_tag_item(f"BLOCK_OFFSET_{col}_{row}", "TIFF", bidx=band)
    size = dataset.get_tag_item(f"BLOCK_SIZE_{col}_{row}", "TIFF", bidx=band)
    if offset is None or size is None:
        return None
    return Block(row, col, int(offset), int(size))


def blocks_in(dataset: Any, band: int, rows: slice, cols: slice) -> list[Block]:
    """The written blocks that rows and columns of a file touch."""
    height, width = dataset.block_shapes[band - 1]
    found = [
        find_block(dataset, band, row, col)
        for row in range(rows.start // height, (rows.stop - 1) // height + 1)
        for col in range(cols.start // width, (cols.stop - 1) // width + 1)
    ]
    return [block for block in found if block is not None]


def cut_short(dataset: Any, band: int, block: Block, *, where: str) -> FileFormatError:
    """The error for a block whose bytes are not all there."""
    height = dataset.block_shapes[band - 1][0]
    length = Path(dataset.name).stat().st_size
    low, high = block.row * height, min((block.row + 1) * height, dataset.height)
    return FileFormatError(
        f"the file is cut short: block {block.row},{block.col} (rows {low}..{high}) needs bytes "
        f"{block.offset}..{block.offset + block.size}, and the file ends at {length}",
        where=where,
        fix="copy or fetch it again",
    )


def _block_counts(dataset: Any, band: int) -> tuple[int, int]:
    height, width = dataset.block_shapes[band - 1]
    return -(-dataset.height // height), -(-dataset.width // width)


_ROWS_PER_STRIP = 278


def rows_per_strip(path: str) -> int | None:
    """Rows in a strip as the file's first directory states them; None where it does not.

    GDAL reads a very large compressed strip row by row and calls each row a block, but must
    unpack all rows before the one it is asked for.
    """
    with Path(path).open("rb") as stream:
        head = stream.read(16)
        order = "<" if head[:2] == b"II" else ">"
        big = struct.unpack(f"{order}H", head[2:4])[0] == 43
        start = (
            struct.unpack(f"{order}Q", head[8:16]) if big else struct.unpack(f"{order}I", head[4:8])
        )
        stream.seek(start[0])
        count = stream.read(8 if big else 2)
        n = struct.unpack(f"{order}{'Q' if big else 'H'}", count)[0]
        size = 20 if big else 12
        entries = stream.read(size * min(n, 1000))
    for at in range(0, len(entries) - size + 1, size):
        tag, kind = struct.unpack(f"{order}HH", entries[at : at + 4])
        if tag == _ROWS_PER_STRIP:
            value = entries[at + size - (8 if big else 4) : at + size]
            width, code = (2, "H") if kind == 3 else (4, "I")
            return int(struct.unpack(f"{order}{code}", value[:width])[0])
    return None
