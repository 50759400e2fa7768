"""Local models in CSV's long form: a line an entry, which shows in a review as the line that changed.

The columns are op,matrix,row,col,value. `matrix` is A, B, C or D, x0, u0, y0 or units (the name under `row`), dt,
time_unit, hold or point. A line without `op` holds for all points, and a file without any `op` is one model. Every
entry is written, zeros too: a line that got lost would else be a zero that nobody meant.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from linverify.core.errors import Place

from .claims import MATRICES, POINTS, Claim, Claimed, unknown
from .csv_tables import SINGLE, Line, Table, claim_of, counted, lines_of, number, separator
from .layout import Entry, Word
from .reader import Reader
from .scalars import quoted

_COLUMNS = ("op", "matrix", "row", "col", "value")
_WORDS = (*MATRICES, *POINTS, "units", *SINGLE)
_MOST_MISSING = 5


def read_long(reader: Reader, data: bytes, shown: str) -> dict[str, Claim]:
    """The models of one file in long form by the name of their point; "" for a model without one."""
    before = len(reader.problems)
    lines = lines_of(reader, data, shown)
    entries = _entries(reader, lines, shown) if lines is not None else []
    if len(reader.problems) > before:
        return {}
    lines_of_point: dict[str, list[dict[str, Word]]] = {}
    for entry in entries:
        lines_of_point.setdefault(entry["op"].text, []).append(entry)
    shared = lines_of_point.pop("", [])
    claims = {}
    for point, own in (lines_of_point or {"": []}).items():
        part = _Part(reader)
        for entry in (*shared, *own):
            part.take(entry)
        claims[point] = part.claim(shown)
    return claims if len(reader.problems) == before else {}


def _entries(reader: Reader, lines: Sequence[Line], shown: str) -> list[dict[str, Word]]:
    """Lines of the long form by the names of their columns; a file without `op` has it empty."""
    if not lines:
        reader.tell(Place(shown), "nothing is written in this file", f"{','.join(_COLUMNS)} is expected")
        return []
    header = [word.text for word in lines[0]]
    if sorted({"op", *header}) != sorted(_COLUMNS) or len(set(header)) != len(header):
        wrong = f"the first line is {quoted(','.join(header))}"
        reader.tell(lines[0][0].place, wrong, f"{','.join(_COLUMNS)} is expected{separator(header)}")
        return []
    entries = []
    for line in lines[1:]:
        if len(line) != len(header):
            reader.tell(line[0].place, f"{counted(len(line), 'value')} in this line", f"{len(header)} are expected")
            continue
        entry = {"op": Word("", line[0].place), **dict(zip(header, line, strict=True))}
        word = entry["matrix"]
        if word.text not in _WORDS:
            unknown(reader, word, _WORDS)
        else:
            entries.append(entry)
    return entries


@dataclass(slots=True)
class _Part:
    """One model while its lines arrive; mutable until then. Names of a matrix are in the order of first mention."""

    reader: Reader
    cells: dict[str, dict[tuple[str, str], Word]] = field(default_factory=dict)
    rows: dict[str, dict[str, Word]] = field(default_factory=dict)
    columns: dict[str, dict[str, Word]] = field(default_factory=dict)
    said: dict[str, Word] = field(default_factory=dict)
    named: dict[str, dict[str, Entry[Word]]] = field(default_factory=dict)

    def take(self, entry: Mapping[str, Word]) -> None:
        """Put one line where it belongs; a second one for the same entry is told."""
        word, row, col, value = (entry[key] for key in _COLUMNS[1:])
        what = f"{word.text} {row.text}".strip()
        if word.text in MATRICES:
            table = self.cells.setdefault(word.text, {})
            self.rows.setdefault(word.text, {}).setdefault(row.text, row)
            self.columns.setdefault(word.text, {}).setdefault(col.text, col)
            twice, what = (row.text, col.text) in table, f"{word.text}[{row.text}, {col.text}]"
            table.setdefault((row.text, col.text), value)
        elif word.text in SINGLE:
            twice = word.text in self.said
            self.said.setdefault(word.text, value)
        else:
            group = self.named.setdefault(word.text, {})
            twice = row.text in group
            group.setdefault(row.text, Entry(row.text, row.place, value))
        if twice:
            self.reader.tell(word.place, f"{what} is written twice")

    def claim(self, shown: str) -> Claim:
        """The model of the lines so far; entries that are missing are told."""
        place = Place(shown)
        tables = {
            word: Table(tuple(self.rows[word].values()), tuple(self.columns[word].values()), table, place)
            for word, table in self.cells.items()
        }
        for word, table in tables.items():
            _full(self.reader, word, table)
        units = tuple(self.named.get("units", {}).values())
        return claim_of(self.reader, tables, place, self.said, units, dict(self._points()))

    def _points(self) -> Iterator[tuple[str, Claimed]]:
        for word in POINTS:
            entries = list(self.named.get(word, {}).values())
            numbers = [(entry, number(self.reader, entry.value, f"{word} {entry.name}")) for entry in entries]
            pairs = tuple(Entry(entry.name, entry.place, read) for entry, read in numbers if read is not None)
            if entries:
                yield word, Claimed(pairs, None, entries[0].place)


def _full(reader: Reader, word: str, table: Table) -> None:
    missing = [
        f"{word}[{row.text}, {column.text}]"
        for row in table.rows
        for column in table.columns
        if (row.text, column.text) not in table.cells
    ]
    if missing:
        more = f" and {len(missing) - _MOST_MISSING} more" if len(missing) > _MOST_MISSING else ""
        many = "is" if len(missing) == 1 else "are"
        told = ", ".join(missing[:_MOST_MISSING])
        reader.tell(table.place, f"{told}{more} {many} missing", "every entry is expected, zeros too")
