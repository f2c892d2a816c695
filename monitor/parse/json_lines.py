"""JSON lines: one object a line.

Strict by RFC 8259: no NaN, no comments, one object a line; of a name that occurs twice the last value counts.
A size must be a JSON number: "12.5" in quotes is "not a number", since a feed that quotes its numbers may
quote anything. Streams and conditions take strings, whole numbers and true/false; conditions also match null
and numbers by value.

The way is three steps, each taken only by the lines that the one before could not settle: a run of lines
decoded at once into records with the wanted fields; one line into such a record; one line piece by piece,
which finds the reason. The records are strict about types, so a line they accept is a good one.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from itertools import pairwise
from operator import attrgetter
from typing import Any

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.blocks import CODE, OK, Cut, Findings
from monitor.parse.lines import Field, FormatError, LineFormat
from monitor.parse.stamps import StampReader

DEEPEST = 100  # brackets inside one another; a fixed limit, so that no decoder's own limit decides
_FEWEST = 6  # a run this short is read line by line
_NUMBER = re.compile(rb"-?\d")
_STRING = re.compile(rb'"(?:[^"\\]|\\.)*(?:"|\Z)', re.DOTALL)
_UNSET = msgspec.UNSET


def path_of(field: Field, key: str) -> tuple[str, ...]:
    r"""The names along a path: "order.units" -> order, units; a point inside a name is written "\."."""
    if not isinstance(field, str) or not field:
        raise FormatError(f'{key}: {field!r} is no field of a JSON object; give a name such as "units"')
    names = tuple(part.replace("\\.", ".") for part in re.split(r"(?<!\\)\.", field))
    if not all(names):
        raise FormatError(f'{key}: {field!r} has an empty name between its points; write "\\\\." for a point in a name')
    if any(char < " " or char in '"\\' for name in names for char in name):
        raise FormatError(f"{key}: {field!r} holds a quote, a backslash or a control character, which no field may")
    return names


class JsonReader:
    """Finds the fields of a LineFormat in JSON lines."""

    def __init__(self, format_: LineFormat) -> None:
        if format_.size is None:
            raise FormatError('size: missing; name the field that holds the size, such as "units"')
        self._size = path_of(format_.size, "size")
        self._time = None if format_.time is None else path_of(format_.time, "time")
        self._stream = [path_of(f, "stream") for f in format_.stream]
        self._where = [(path_of(f, "where"), _wanted(values)) for f, values in format_.where]
        self._stamps = StampReader(format_.timezone, format_.time_unit)
        paths = [self._size, *([self._time] if self._time else []), *self._stream, *(p for p, _ in self._where)]
        _refuse_nested(paths)
        record = self._record(paths)
        decoder = msgspec.json.Decoder(record)
        self._decode_one, self._decode_run = decoder.decode, decoder.decode_lines

    def read(self, cut: Cut, found: Findings) -> None:
        """Fill in what the lines hold; lines with a verdict already are left alone."""
        self._mark_deep(cut, found)
        _Block(self, cut, found).read()

    def _record(self, paths: Sequence[tuple[str, ...]]) -> Any:
        """A record type that holds the wanted fields and skips all others."""
        types: dict[tuple[str, ...], Any] = {}
        for path in [*self._stream, *(p for p, _ in self._where)]:
            types[path] = str | int | bool
        if self._time:
            types[self._time] = str | int | float
        if self._size not in types:
            types[self._size] = float
        elif self._size == self._time:
            types[self._size] = int | float
        else:
            types[self._size] = int  # a size that is also a name or a condition: whole numbers only go fast
        if self._where:  # lines that are not meant need not have the other fields
            conditions = {p for p, _ in self._where}
            types = {p: t if p in conditions else t | msgspec.UnsetType for p, t in types.items()}
        return _nested_record(types, ())

    def _mark_deep(self, cut: Cut, found: Findings) -> None:
        lengths = cut.ends - cut.starts
        if not lengths.size or lengths.max() <= DEEPEST:
            return
        own = np.count_nonzero(cut.bytes_[cut.starts] == ord("{"))  # each of these lines has one to itself
        if cut.block.count(b"[") + cut.block.count(b"{") - own <= DEEPEST - 1:
            return
        opening = (cut.bytes_ == ord("[")) | (cut.bytes_ == ord("{"))
        many = np.add.reduceat(opening.astype(np.int64), cut.starts) > DEEPEST
        for i in np.flatnonzero(many & (found.verdict == OK)).tolist():
            if depth(cut.line(i)) > DEEPEST:
                found.verdict[i] = CODE[why.TOO_DEEP]

    def piece_by_piece(self, line: bytes) -> str | tuple[float, object, object]:
        """One line without any assumption: a reason, or size, time value and stream's name (None: unusable)."""
        top = _members(line)
        if top is None:
            return why.NOT_JSON if not _is_json(line) else why.FIELD_MISSING
        for path, wanted in self._where:
            value = _follow(top, path)
            if value is None or not wanted.match(_scalar(value)):
                return why.CONDITION
        raw = _follow(top, self._size)
        if raw is None:
            return why.FIELD_MISSING
        if not _NUMBER.match(raw):
            return why.NOT_A_NUMBER
        time = None
        if self._time:
            found = _follow(top, self._time)
            time = None if found is None else _scalar(found)
        names = [_name(_follow(top, path)) for path in self._stream]
        return float(raw), time, None if None in names else "/".join(names)  # type: ignore[arg-type]


class _Wanted:
    """The values a condition accepts."""

    def __init__(self, texts: tuple[str, ...]) -> None:
        self._texts = frozenset(texts)
        self._numbers = frozenset(n for t in texts if (n := _as_number(t)) is not None)

    def match(self, value: object) -> bool:
        """Whether a decoded scalar is one of the values."""
        if type(value) is str:
            return value in self._texts
        if type(value) is bool:
            return ("true" if value else "false") in self._texts
        if type(value) is int or type(value) is float:
            return value in self._numbers
        return value is None and "null" in self._texts


class _Block:
    """One block on its way through the three steps."""

    def __init__(self, reader: JsonReader, cut: Cut, found: Findings) -> None:
        self._reader, self._cut, self._found = reader, cut, found
        tail = cut.bytes_[np.maximum(cut.ends - 1, 0)]
        before = cut.bytes_[np.maximum(cut.ends - 2, 0)]
        last = np.where(tail == 13, before, tail)
        self._records: list[Any] = []
        self._rows: list[NDArray[np.int64]] = []
        self._framed = (cut.bytes_[cut.starts] == ord("{")) & (last == ord("}")) & (found.verdict == OK)

    def read(self) -> None:
        n = self._cut.ends.size
        odd = np.flatnonzero(~self._framed)  # no object in plain sight: such a line would spoil a whole run
        first = 0
        for i in [*odd.tolist(), n]:
            if i > first:
                self._run(first, i)
            if i < n:
                self._one_by_one(i, i + 1)
            first = i + 1
        if self._records:
            self._take(self._records, np.concatenate(self._rows))

    def _run(self, first: int, last: int) -> None:
        """Framed lines first..last-1 at once if they can be, else in eight smaller runs."""
        if last - first <= _FEWEST:
            self._one_by_one(first, last)
            return
        cut = self._cut
        whole = first == 0 and last == cut.ends.size
        text = cut.block if whole else cut.block[cut.starts[first] : cut.ends[last - 1] + 1]
        try:
            records = self._reader._decode_run(text)
        except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
            records = []
        # Two objects on one line would make the count differ; one object on two lines cannot be,
        # since each line starts and ends as an object does.
        if len(records) == last - first:
            self._records += records
            self._rows.append(np.arange(first, last))
            return
        for a, b in pairwise(np.linspace(first, last, 9, dtype=np.int64).tolist()):
            if b > a:
                self._run(a, b)

    def _one_by_one(self, first: int, last: int) -> None:
        decode, verdict, rows = self._reader._decode_one, self._found.verdict, []
        for i in range(first, last):
            if verdict[i] != OK:
                continue
            try:
                self._records.append(decode(self._cut.line(i)))
                rows.append(i)
            except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
                self._hard(i)
        if rows:
            self._rows.append(np.array(rows, np.int64))

    def _hard(self, i: int) -> None:
        found = self._found
        if found.verdict[i] != OK:
            return
        outcome = self._reader.piece_by_piece(self._cut.line(i))
        if isinstance(outcome, str):
            found.verdict[i] = CODE[outcome]
            return
        size, time, stream = outcome
        found.sizes[i] = size
        found.stamps[i] = self._reader._stamps.value(time)
        if self._reader._stream:
            found.codes[i] = -1 if stream is None else found.names.code(str(stream))

    def _take(self, records: list[Any], rows: NDArray[np.int64]) -> None:
        """Records of lines into the findings."""
        reader, found = self._reader, self._found
        if reader._where:
            records, rows = self._meant(records, rows)
            if not records:
                return
        where: NDArray[np.int64] | slice = rows if len(records) < found.sizes.size else slice(None)
        found.sizes[where] = _column(records, reader._size)
        if reader._time:
            found.stamps[where] = reader._stamps.values(_column(records, reader._time))
        if reader._stream:
            columns = [_column(records, path) for path in reader._stream]
            found.codes[where] = self._codes(columns)

    def _meant(self, records: list[Any], rows: NDArray[np.int64]) -> tuple[list[Any], NDArray[np.int64]]:
        """Only the records that meet the conditions and have all fields."""
        reader = self._reader
        keep = [True] * len(records)
        for path, wanted in reader._where:
            keep = [k and wanted.match(v) for k, v in zip(keep, _column(records, path), strict=True)]
        paths = [reader._size, *([reader._time] if reader._time else []), *reader._stream]
        verdict, kept, kept_rows = self._found.verdict, [], []
        for record, row, meant in zip(records, rows.tolist(), keep, strict=True):
            if verdict[row] != OK:
                continue
            if not meant:
                verdict[row] = CODE[why.CONDITION]
            elif any(_get(record, path) is _UNSET for path in paths):
                self._hard(row)
            else:
                kept.append(record)
                kept_rows.append(row)
        return kept, np.array(kept_rows, np.int64)

    def _codes(self, columns: list[list[object]]) -> list[int]:
        names = self._found.names
        distinct: dict[object, None] = dict.fromkeys(columns[0]) if len(columns) == 1 else {}
        if distinct and all(type(value) is str for value in distinct):
            texts: list[str] = columns[0]  # type: ignore[assignment]
        else:
            texts = ["/".join(map(_text, parts)) for parts in zip(*columns, strict=True)]
            empty = [any(part == "" for part in parts) for parts in zip(*columns, strict=True)]
            if any(empty):  # an empty part makes the whole name unusable, though the rest is not empty
                texts = ["" if e else t for e, t in zip(empty, texts, strict=True)]
            distinct = dict.fromkeys(texts)
        codes = {text: names.code(str(text)) for text in distinct}
        return list(map(codes.__getitem__, texts))


def depth(line: bytes) -> int:
    """How deep brackets stand inside one another, strings left out."""
    deepest = now = 0
    for byte in _STRING.sub(b"", line):
        if byte in b"[{":
            now += 1
            deepest = max(deepest, now)
        elif byte in b"]}":
            now -= 1
    return deepest


def _wanted(values: tuple[str, ...]) -> _Wanted:
    return _Wanted(values)


def _as_number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def _refuse_nested(paths: Sequence[tuple[str, ...]]) -> None:
    for inner in paths:
        for outer in paths:
            if len(outer) < len(inner) and inner[: len(outer)] == outer:
                a, b = ".".join(inner), ".".join(outer)
                raise FormatError(f"size: {a!r} lies inside {b!r}; a field cannot be a value and an object at once")


def _nested_record(types: dict[tuple[str, ...], Any], prefix: tuple[str, ...]) -> Any:
    """A Struct with one attribute a wanted name; attributes are numbered, since names may be anything."""
    here: dict[str, Any] = {}
    for path in types:
        if path[: len(prefix)] == prefix:
            name = path[len(prefix)]
            leaf = (*prefix, name)
            here[name] = types[leaf] if leaf in types else _nested_record(types, leaf)
    optional = [n for n, t in here.items() if _may_lack(t)]
    fields: list[Any] = [(_attribute(n), here[n]) for n in here if n not in optional]
    fields += [(_attribute(n), here[n], _UNSET) for n in optional]
    rename = {_attribute(n): n for n in here}
    return msgspec.defstruct("Record", fields, rename=rename, gc=False)


def _may_lack(type_: Any) -> bool:
    return msgspec.UnsetType in getattr(type_, "__args__", ())


def _attribute(name: str) -> str:
    return "f" + name.encode("utf-8").hex()


def _get(record: Any, path: tuple[str, ...]) -> Any:
    for name in path:
        record = getattr(record, _attribute(name))
    return record


def _column(records: list[Any], path: tuple[str, ...]) -> list[Any]:
    for name in path:
        records = list(map(attrgetter(_attribute(name)), records))
    return records


_MEMBERS = msgspec.json.Decoder(dict[str, msgspec.Raw])
_ANY = msgspec.json.Decoder(msgspec.Raw)
_SCALAR = msgspec.json.Decoder(str | int | float | bool | None)


def _members(text: bytes) -> dict[str, msgspec.Raw] | None:
    try:
        return _MEMBERS.decode(text)
    except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
        return None


def _is_json(text: bytes) -> bool:
    try:
        _ANY.decode(text)
    except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
        return False
    return True


def _follow(top: dict[str, msgspec.Raw], path: tuple[str, ...]) -> bytes | None:
    """The raw text at the end of a path, None when it leads nowhere."""
    members: dict[str, msgspec.Raw] | None = top
    for i, name in enumerate(path):
        raw = members.get(name) if members is not None else None
        if raw is None:
            return None
        if i + 1 == len(path):
            return bytes(raw).strip()
        members = _members(bytes(raw))
    return None


def _scalar(raw: bytes) -> object:
    """A decoded scalar; for what is none (or a number beyond floats) an object that equals nothing."""
    try:
        return _SCALAR.decode(raw)
    except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
        return _UNSET


def _name(raw: bytes | None) -> str | None:
    if raw is None:
        return None
    value = _scalar(raw)
    text = _text(value) if type(value) in (str, int, bool) else ""
    return text or None


def _text(value: object) -> str:
    if type(value) is bool:
        return "true" if value else "false"
    return str(value)
