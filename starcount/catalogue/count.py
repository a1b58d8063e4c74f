"""Counting a star list of any size into fields and bins: read a batch, tally it in a thread, add up at the end."""

import os
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from queue import SimpleQueue

import numpy as np
import pyarrow as pa

from starcount.catalogue import kernels
from starcount.catalogue.columns import Layout, Position
from starcount.catalogue.cuts import Cut
from starcount.catalogue.match import Table, tables
from starcount.catalogue.source import Source, numbers
from starcount.errors import InputError, Problem, Problems

WORKERS = min(4, os.cpu_count() or 1)
"""Threads that tally while the main one reads; more than four outrun the reading."""

NO_POSITION, NO_MAGNITUDE, NO_COLOUR = "position missing", "magnitude missing", "colour missing"
OUTSIDE_BINS, OUTSIDE_COLOURS, OUTSIDE_FIELDS = "outside the bins", "outside the colour bins", "outside every field"
STAGES = (NO_MAGNITUDE, OUTSIDE_BINS, NO_COLOUR, OUTSIDE_COLOURS, OUTSIDE_FIELDS)
"""Why a row is dropped, by how far it came (as ``kernels`` numbers it)."""
OF_COLOUR = (NO_COLOUR, OUTSIDE_COLOURS)
"""Those that are reported only where a group has a colour."""

DIFFERENCE_MAG = {"f4": 2e-6, "f8": 1e-9}
"""A difference of two magnitudes may come out this much too blue by rounding, at most (two roundings of numbers below
32, in the columns' precision): by so much it still opens the bin that begins at its decimals."""


@dataclass(frozen=True, eq=False)
class Counted:
    """What came of a star list: counts per group (field, bin) int64, and what happened to every row.

    ``rows == counted + sum(dropped.values())``: a row is dropped under the first reason that holds of it; with several
    groups under that of the group in which it came farthest. A star inside several overlapping fields adds to each
    and is one counted row. ``columns`` tells which columns of the first file were used.
    """

    counts: dict[str, np.ndarray]
    rows: int
    counted: int
    dropped: dict[str, int]
    columns: dict[str, str]


@dataclass(frozen=True, eq=False)
class Tally:
    """Sums of one thread: counts per group (field, bin); rows excluded by reason; rows by how far they came."""

    counts: list[np.ndarray]
    excluded: np.ndarray
    reached: np.ndarray

    @classmethod
    def empty(cls, groups: Sequence, n_cut: int) -> "Tally":
        shapes = [(len(group.fields.name), group.n_bin) for group in groups]
        # Reasons to exclude a row: none, no position, then two per cut.
        return cls(
            [np.zeros(shape, dtype=np.int64) for shape in shapes],
            np.zeros(2 + 2 * n_cut, dtype=np.int64),
            np.zeros(kernels.COUNTED + 1, dtype=np.int64),
        )


@dataclass(frozen=True, eq=False)
class Counter:
    """Everything a batch of one file needs to be tallied: its layout, the cuts, and per group its tables of fields."""

    path: str
    layout: Layout
    cuts: Sequence[Cut]
    groups: Sequence
    tables: Sequence[Sequence[Table]]

    def add(self, rows: pa.RecordBatch, first_row: int, tally: Tally) -> None:
        """Tally one batch; ``first_row`` is the number of rows before it in the file."""
        excluded, lon_rad, lat_rad = self.positions(rows, first_row)
        for k, cut in enumerate(self.cuts):
            missing, passes = cut.apply(rows.column(cut.column))
            excluded[(excluded == 0) & missing] = 2 + 2 * k
            excluded[(excluded == 0) & ~passes] = 3 + 2 * k
        tally.excluded[:] += np.bincount(excluded, minlength=tally.excluded.size)
        use = excluded == 0
        reached = np.zeros(len(use), dtype=np.uint8)
        layout = self.layout
        for group, name, colour, looked_up, counts in zip(
            self.groups, layout.magnitudes, layout.colours, self.tables, tally.counts, strict=True
        ):
            m_mag, edges = self.magnitudes(rows.column(name), group.edges_mag)
            c_mag, colour_edges = self.colours([rows.column(column) for column in colour], group.edges_colour_mag)
            for table in looked_up:
                kernels.count(
                    lon_rad, lat_rad, m_mag, c_mag, use, edges, colour_edges, *table.arrays, counts, reached
                )  # fmt: skip
        tally.reached[:] += np.bincount(reached[use], minlength=tally.reached.size)

    def positions(self, rows: pa.RecordBatch, first_row: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return excluded (row,), 1 where there is no position, and both angles (row,) in radians, there 0."""
        position = self.layout.position
        lon_rad, lat_rad = (
            numbers(rows.column(name)).astype(np.float64) * to_rad
            for name, to_rad in zip(position.names, position.to_rad, strict=True)
        )
        refuse_beyond(self.path, position, (lon_rad, lat_rad), first_row)
        there = np.isfinite(lon_rad) & np.isfinite(lat_rad)
        lon_rad[~there] = lat_rad[~there] = 0.0  # the kernel turns whole blocks into pixels, and NaN has none
        return (~there).astype(np.uint8), lon_rad, lat_rad

    @staticmethod
    def magnitudes(column: pa.Array, edges_mag: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return magnitudes (or colours), NaN where there is none, and edges rounded to the precision of the column.

        A magnitude of 10.2 stored in single precision then opens the bin at 10.2, as it does in double precision.
        """
        stored = numbers(column)
        precision = stored.dtype if stored.dtype.kind == "f" else np.float64
        m_mag = stored.astype(np.float64)
        m_mag[np.isinf(m_mag)] = np.nan
        return m_mag, np.asarray(edges_mag).astype(precision).astype(np.float64)

    @staticmethod
    def colours(columns: Sequence[pa.Array], edges_mag: np.ndarray | None) -> tuple[np.ndarray, np.ndarray]:
        """Return colours, NaN where there is none, and edges; from one column, two, or (empty both) none."""
        if not columns:
            return np.zeros(0), np.zeros(0)
        if len(columns) == 1:
            return Counter.magnitudes(columns[0], edges_mag)
        stored = [numbers(column) for column in columns]
        coarse = any(values.dtype.kind == "f" and values.dtype.itemsize < 8 for values in stored)
        blue, red = (values.astype(np.float64) for values in stored)
        with np.errstate(invalid="ignore"):
            c_mag = blue - red
        c_mag[np.isinf(c_mag)] = np.nan
        return c_mag, edges_mag - DIFFERENCE_MAG["f4" if coarse else "f8"]


def refuse_beyond(path: str, position: Position, angles_rad: tuple[np.ndarray, np.ndarray], first_row: int) -> None:
    """Refuse angles that no sky has: a wrong unit or column, not a wrong star."""
    for name, to_rad, angle_rad, limit_deg in zip(position.names, position.to_rad, angles_rad, (360, 90), strict=True):
        limit = np.radians(limit_deg) * (1 + 1e-12)  # 90 in single or double precision, turned to radians
        beyond = np.isfinite(angle_rad) & (np.abs(angle_rad) > limit)
        if beyond.any():
            row = int(beyond.argmax())
            where = f"row {first_row + row + 1}, column {name!r}"
            found = f"{angle_rad[row] / to_rad:.6g} = {np.degrees(angle_rad[row]):.6g} deg"
            raise Problems(Problem(path, where, found, f"-{limit_deg} to {limit_deg} deg"))


def count_sources(
    sources: Sequence[tuple[Source, Layout]],
    groups: Sequence,
    cuts: Sequence[Cut],
    progress: Callable[[int, int], None] | None,
) -> Counted:
    """Return the counts of star lists in the fields and bins of the groups; memory does not grow with the rows."""
    tallies = [Tally.empty(groups, len(cuts)) for _ in range(WORKERS)]
    looked_up = {
        frame: [tables(group.fields, frame) for group in groups]
        for frame in {layout.position.frame for _, layout in sources}
    }
    bytes_before, bytes_all = 0, sum(source.path.stat().st_size for source, _ in sources)
    with ThreadPoolExecutor(WORKERS) as pool:
        for source, layout in sources:
            counter = Counter(str(source.path), layout, cuts, groups, looked_up[layout.position.frame])
            size = source.path.stat().st_size
            for share in tally_file(source, counter, pool, tallies):
                if progress is not None:
                    progress(bytes_before + int(share * size), bytes_all)
            bytes_before += size
    return added_up(tallies, groups, cuts, sources[0])


def tally_file(source: Source, counter: Counter, pool: ThreadPoolExecutor, tallies: list[Tally]) -> Iterator[float]:
    """Tally one file, yielding the share that has been read; the threads take turns with the tallies."""
    free: SimpleQueue[Tally] = SimpleQueue()
    for tally in tallies:
        free.put(tally)

    def add(rows: pa.RecordBatch, first_row: int) -> None:
        tally = free.get()
        try:
            counter.add(rows, first_row, tally)
        finally:  # a refused batch too: the batches that are already queued wait for a tally
            free.put(tally)

    pending: deque[Future] = deque()
    first_row = 0
    for batch in source.batches(counter.layout.wanted):
        pending.append(pool.submit(add, batch.rows, first_row))
        first_row += batch.rows.num_rows
        if len(pending) > len(tallies):  # reading waits here for the tallying: few batches are in memory
            pending.popleft().result()
        yield batch.share
    for tallied in pending:
        tallied.result()


def added_up(tallies: list[Tally], groups: Sequence, cuts: Sequence[Cut], first: tuple[Source, Layout]) -> Counted:
    excluded = sum(tally.excluded for tally in tallies)
    reached = sum(tally.reached for tally in tallies)
    if excluded.sum() == 0:
        raise InputError(f"{first[0].path}: holds no rows; expected at least one star")
    coloured = any(group.colour is not None for group in groups)
    stages = [(r, n) for r, n in zip(STAGES, reached.tolist(), strict=False) if coloured or r not in OF_COLOUR]
    reasons = [NO_POSITION, *(reason for cut in cuts for reason in cut.reasons)]
    dropped: dict[str, int] = {}
    for reason, n in [*zip(reasons, excluded[1:].tolist(), strict=True), *stages]:
        dropped[reason] = dropped.get(reason, 0) + n  # a cut given twice has its reasons once
    counts = {group.name: sum(tally.counts[g] for tally in tallies) for g, group in enumerate(groups)}
    return Counted(counts, int(excluded.sum()), int(reached[kernels.COUNTED]), dropped, first[1].found)
