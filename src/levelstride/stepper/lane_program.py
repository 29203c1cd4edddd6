"""A step as rows written in sweeps over the layers: what the lane kernels read.

Every set of rows says what it reads. From that alone follows how far it must lag behind the sweep
that it shares with others, so that a stage crosses its arrays twice, upwards and downwards, and
whatever follows from them is done on the way.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from levelstride.stepper.lane_entries import NO_FACTOR, Entry
from levelstride.stepper.lane_kernels import SHAPES, Program

Array = NDArray[Any]
_Numbers = list[tuple[int, ...]]

BLOCK: Final = 32
"""Layers that a set of rows is written for at once: what is read next is still near."""

MOST: Final = max(shape[0] for shape in SHAPES)
"""Entries added at once."""

ALIGNED: Final = 64
"""Bytes of a cache line."""


@dataclass(frozen=True, slots=True, eq=False)
class Read:
    """One operand: rows of a slot, and the coefficient; a plain number if ``shared`` is one."""

    slot: int
    entry: Entry

    @property
    def is_copy(self) -> bool:
        """Whether the same unknown is taken as it is."""
        shared = self.entry.shared
        alike = self.entry.offset == 0 and self.entry.factor == NO_FACTOR
        return alike and shared is not None and shared.size == 1 and bool(shared[0] == 1.0)


def constant(slot: int, number: float) -> Read:
    """Read the same unknown of a slot times a number."""
    return Read(slot, Entry(0, np.array([number])))


@dataclass(frozen=True, slots=True, eq=False)
class Rows:
    """One field of a slot at all layers, as a sum of what is read."""

    slot: int
    kind: int
    reads: tuple[Read, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Group:
    """Rows with one lag, in order. ``move`` is +1 or -1 if they must go up or down, else 0."""

    rows: tuple[Rows, ...]
    move: int = 0


@dataclass(slots=True)
class _Sweep:
    move: int
    block: int = BLOCK
    rows: list[tuple[Rows, int]] = field(default_factory=list)
    written: dict[tuple[int, int], int] = field(default_factory=dict)
    read: dict[tuple[int, int], int] = field(default_factory=dict)

    def add(self, group: Group, stride: int) -> None:
        """Append a group with the smallest lag that keeps every read before or after its write."""
        own = {(rows.slot, rows.kind): i for i, rows in enumerate(group.rows)}
        lag, uses = 0, []
        for i, rows in enumerate(group.rows):
            for read in rows.reads:
                up, kind = divmod(rows.kind + read.entry.offset, stride)
                source, reach = (read.slot, kind), self.move * up
                uses.append((source, reach))
                if source in own and group.move:
                    if up and own[source] > i:
                        self.block = 1
                elif source in self.written:
                    lag = max(lag, self.written[source] + reach)
            target = rows.slot, rows.kind
            lag = max(lag, self.written.get(target, 0), self.read.get(target, 0))
        for source, reach in uses:
            self.read[source] = max(self.read.get(source, 0), lag - reach)
        self.written |= dict.fromkeys(own, lag)
        self.rows += [(rows, lag) for rows in group.rows]


def moved(found: Sequence[_Sweep], stride: int) -> int:
    """Rows a layer that a step must read or write, each once a sweep however often it is used."""
    total = 0
    for sweep in found:
        rows = [rows for rows, _ in sweep.rows]
        written = {(each.slot, each.kind) for each in rows}
        read: set[tuple[int, int]] = set()
        for each in rows:
            read |= {
                (r.slot, (each.kind + r.entry.offset) % stride)
                for r in each.reads
                if r.slot != each.slot or not r.entry.offset
            }
        total += len(written) + len(read)
    return total


def sweeps(groups: Sequence[Group], stride: int) -> list[_Sweep]:
    """Share the groups out among as few sweeps as their directions allow."""
    found: list[_Sweep] = []
    for i, group in enumerate(groups):
        if not found or group.move not in (0, found[-1].move):
            moves = (later.move for later in groups[i:] if later.move)
            found.append(_Sweep(next(moves, 1)))
        found[-1].add(group, stride)
    return found


class Encoder:
    """Writes sweeps as the kernel reads them.

    Parameters
    ----------
    nlev, stride : int
    width : int
        Numbers in a row of lanes.
    parts : int
        1, or 2 where a row holds real and imaginary parts.
    dtype : numpy.dtype
        Real type of the workspace.
    """

    def __init__(self, nlev: int, stride: int, width: int, parts: int, dtype: Any) -> None:
        self.nlev, self.stride, self.width, self.parts = nlev, stride, width, parts
        self.dtype = np.dtype(dtype)
        self.row = stride * width
        self._halo = 0
        self._coefficients: list[Array] = [np.zeros(1)]
        self._known: dict[tuple[int, float], int] = {}
        self._ncoefficient = 1
        self._lanes: list[tuple[Array, bool]] = []
        self._places: dict[tuple[int, bool], int] = {}
        self._nlane_number: int = 0

    def encode(self, found: Sequence[_Sweep], nslot: int, factors: Sequence[Array]) -> Program:
        """Return the program; `base`, `size` and `lanes` hold for it afterwards."""
        self._measure(found, nslot)
        self._factors = factors
        sweep: _Numbers = []
        rows: _Numbers = []
        entry: _Numbers = []
        group: _Numbers = []
        lane_entry: _Numbers = []
        for each in found:
            begin = len(rows)
            for written, lag in each.rows:
                for step in _passes(written, each, self.stride):
                    first = len(entry), len(group), len(lane_entry)
                    entry += [self._entry(written, read) for read in step.plain]
                    for factor, reads in step.grouped:
                        group.append((*self._factor(factor), len(entry), len(reads)))
                        entry += [self._entry(written, read) for read in reads]
                    lane_entry += [self._lane_entry(written, read) for read in step.single]
                    target = self.base[written.slot] + written.kind * self.width
                    counts = len(step.plain), len(step.grouped), len(step.single)
                    found_at = (x for pair in zip(first, counts, strict=True) for x in pair)
                    rows.append((target, lag, *found_at, step.shape(self._factors)))
            largest = max(lag for _, lag in each.rows)
            sweep.append((begin, len(rows), each.move, each.block, largest))
        return Program(
            sweep=_table(sweep, 5),
            rows=_table(rows, 9),
            entry=_table(entry, 3),
            group=_table(group, 4),
            lane_entry=_table(lane_entry, 3),
            coefficient=np.concatenate(self._coefficients).astype(self.dtype),
        )

    def lanes(self, nlane: int) -> Array:
        """Numbers that differ from lane to lane, shape (ntile, n)."""
        lanes = self.width // self.parts
        ntile = -(-nlane // lanes)
        table = np.zeros((ntile, self._nlane_number), self.dtype)
        filled = 0
        for values, imaginary in self._lanes:
            padded = np.zeros((values.shape[0], ntile * lanes))
            padded[:, :nlane] = values
            tiles = padded.reshape(-1, ntile, lanes).transpose(1, 0, 2)
            if self.parts == 2:
                tiles = np.concatenate((-tiles if imaginary else tiles, tiles), axis=2)
            size = values.shape[0] * self.width
            table[:, filled : filled + size] = tiles.reshape(ntile, size)
            filled += size
        return table

    def _measure(self, found: Sequence[_Sweep], nslot: int) -> None:
        offsets = [
            (rows.kind + read.entry.offset) // self.stride
            for each in found
            for rows, _ in each.rows
            for read in rows.reads
        ]
        self._halo = max(0, *map(abs, offsets), 0)
        line = ALIGNED // self.dtype.itemsize
        # not a multiple of a page: equal places of two slots would fall into the same cache lines
        slot = (self.nlev + 2 * self._halo) * self.row
        slot = -(-slot // (64 * line)) * 64 * line + 11 * line
        self.base: list[int] = [i * slot + self._halo * self.row for i in range(nslot)]
        self.size = nslot * slot

    def _entry(self, rows: Rows, read: Read) -> tuple[int, int, int]:
        values = read.entry.shared
        assert values is not None
        key = id(values), 0.0
        if values.size == 1:
            key = 0, float(values[0])
        if key not in self._known:
            self._known[key] = self._ncoefficient
            self._coefficients.append(values)
            self._ncoefficient += values.size
        return self._place(rows, read), self._known[key], int(values.size > 1)

    def _place(self, rows: Rows, read: Read) -> int:
        return self.base[read.slot] + (rows.kind + read.entry.offset) * self.width

    def _factor(self, number: int) -> tuple[int, int]:
        factor = self._factors[number]
        real = self._lane_place((number, False), factor.real[None], imaginary=False)
        if not np.any(factor.imag):
            return real, -1
        return real, self._lane_place((number, True), factor.imag[None], imaginary=True)

    def _lane_entry(self, rows: Rows, read: Read) -> tuple[int, int, int]:
        values, imaginary = read.entry.lanes, read.entry.imaginary
        assert values is not None
        place = self._lane_place((-1 - id(values), imaginary), values, imaginary=imaginary)
        return self._place(rows, read), place, int(imaginary)

    def _lane_place(self, key: tuple[int, bool], values: Array, *, imaginary: bool) -> int:
        if key not in self._places:
            self._places[key] = self._nlane_number
            self._lanes.append((values, imaginary))
            self._nlane_number += values.size // values.shape[-1] * self.width
        return self._places[key]


def _table(rows: Sequence[Sequence[int]], columns: int) -> NDArray[np.int64]:
    return np.array(rows, dtype=np.int64).reshape(-1, columns)


@dataclass(frozen=True, slots=True, eq=False)
class _Pass:
    """What is added at once: shared entries, groups by factor, entries that differ by lane."""

    plain: list[Read]
    grouped: list[tuple[int, list[Read]]] = field(default_factory=list)
    single: list[Read] = field(default_factory=list)
    carry: bool = False

    def shape(self, factors: Sequence[Array]) -> int:
        """Return the number of the loop that is made for it, 0 if there is none."""
        if self.single or len(self.grouped) > 1:
            return 0
        turned, many = False, 0
        for factor, reads in self.grouped:
            turned, many = bool(np.any(factors[factor].imag)), len(reads)
        key = len(self.plain), int(self.carry), many, int(turned)
        return SHAPES.index(key) + 1 if key in SHAPES else 0


def _passes(rows: Rows, sweep: _Sweep, stride: int) -> list[_Pass]:
    """Split long sums; what the sweep has just written itself is added last."""
    plain, grouped, single = _sorted(rows)
    again = [read for read in rows.reads if read.slot == rows.slot]
    recursive = [r for r in again if r.entry.offset and r.entry.offset % stride == 0]
    carried = [r for r in recursive if r in plain and r.entry.offset == -sweep.move * stride]
    carry = len(recursive) == 1 and len(carried) == 1 and len(plain) > 1 and not single
    plain = [read for read in plain if read not in carried] + carried
    groups = [
        (f, reads[i : i + 2]) for f, reads in grouped.items() for i in range(0, len(reads), 2)
    ]
    whole = _Pass(plain, list(grouped.items()), single, carry and not grouped)
    many = len(groups) + (len(plain) > MOST)
    if sweep.block == 1 or single or not many or (recursive and not carry):
        return [whole]
    own = constant(rows.slot, 1.0)
    found: list[_Pass] = []
    last = plain[-1:] if carry else []
    rest = plain[:-1] if carry else plain
    for factor, reads in groups:
        room = 2 if len(reads) == 1 else 1
        taken, rest = (rest[:room], rest[room:]) if not found else ([own], rest)
        found.append(_Pass(taken, [(factor, reads)]))
    while rest or last:
        taken = [own] if found else []
        room = MOST - len(taken) - len(last)
        taken, rest = taken + rest[:room], rest[room:]
        if rest:
            found.append(_Pass(taken))
        else:
            found.append(_Pass(taken + last, carry=carry))
            last = []
    return found


def _sorted(rows: Rows) -> tuple[list[Read], dict[int, list[Read]], list[Read]]:
    """Sort what is read: one number for all lanes, groups by factor, lane by lane."""
    plain: list[Read] = []
    grouped: dict[int, list[Read]] = {}
    single: list[Read] = []
    for read in rows.reads:
        if read.entry.lanes is not None:
            single.append(read)
        elif read.entry.factor == NO_FACTOR:
            plain.append(read)
        else:
            grouped.setdefault(read.entry.factor, []).append(read)
    plain.sort(key=lambda read: (read.slot, read.entry.offset) != (rows.slot, 0))
    return plain, grouped, single
