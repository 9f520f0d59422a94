"""Reads columns of numbers from CSV files beside the model; it leaves their meaning to the caller."""

from __future__ import annotations

import csv
import io
import math

from outspread.errors import Fault, Place
from outspread.reading.context import Context
from outspread.reading.document import Path
from outspread.reading.words import quoted, suggestion

LARGEST_CSV = 64 << 20  # bytes


def read_columns(
    context: Context, path: Path, wanted: dict[str, Path]
) -> dict[str, tuple[float, ...]] | None:
    """The numbers of columns of the CSV file named at `path`, by the headers in `wanted`.

    `wanted` maps each header to the place in the model that asks for it. None, with the faults noted,
    where the file or a column is missing or a cell is no number.
    """
    name = context.text(path)
    source = _source(context, path, name)
    if source is None:
        return None
    place_of = str(context.folder / name) if context.folder.parts else name
    try:
        text = source.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = source[: error.start].count(b"\n") + 1
        context.faults.append(
            Fault(Place(place_of, line, 1), "this line is not UTF-8 text; save the file as UTF-8")
        )
        return None
    return _Table(context, place_of, text).columns(path, wanted)


def _source(context: Context, path: Path, name: str) -> bytes | None:
    """The bytes of the file, kept in the model's data; only files in the model's own folder are read."""
    if name in context.data:
        return context.data[name]
    folder = context.folder.resolve()
    try:
        file = (folder / name).resolve()
        if not file.is_relative_to(folder):
            context.fault(
                path, f"the file {quoted(name)} lies outside the model's folder; put it beside the model"
            )
            return None
        if file.is_file() and file.stat().st_size > LARGEST_CSV:
            context.fault(
                path, f"the file {quoted(name)} is larger than {LARGEST_CSV >> 20} MiB; use a smaller sample"
            )
            return None
        source = file.read_bytes()
    except (FileNotFoundError, IsADirectoryError, NotADirectoryError):
        near = suggestion(
            name, sorted(entry.name for entry in folder.glob("*.csv")), "CSV files beside the model"
        )
        context.fault(path, f"there is no file {quoted(name)} beside the model; {near}")
        return None
    except (OSError, ValueError, RuntimeError) as error:
        reason = getattr(error, "strerror", None) or "its name is not usable"
        context.fault(
            path, f"the file {quoted(name)} cannot be read ({reason}); check its name and its permissions"
        )
        return None
    context.data[name] = source
    return source


class _Table:
    """A CSV file with a header line, comma-separated."""

    def __init__(self, context: Context, file: str, text: str):
        self.context, self.file, self.text = context, file, text

    def columns(self, path: Path, wanted: dict[str, Path]) -> dict[str, tuple[float, ...]] | None:
        # strict is off: a stray quote then shows as a cell that is no number, at its line.
        reader = csv.reader(io.StringIO(self.text, newline=""))
        before = len(self.context.faults)
        try:
            header = [cell.strip() for cell in next(reader, [])]
            index = self._places(path, header, wanted)
            if len(self.context.faults) > before:
                return None
            values: dict[str, list[float]] = {name: [] for name in wanted}
            for row in reader:
                if not any(cell.strip() for cell in row):
                    continue
                for name, column in index.items():
                    number = self._number(reader.line_num, name, row[column] if column < len(row) else "")
                    if number is not None:
                        values[name].append(number)
                if len(self.context.faults) - before >= 10:
                    break
        except csv.Error as error:
            self._fault(
                reader.line_num,
                f"this line is no CSV ({error}); write one row a line, with commas between cells",
            )
            return None
        if len(self.context.faults) > before:
            return None
        if not next(iter(values.values())):
            self._fault(1, "the file has a header and no rows; add at least one row of numbers")
            return None
        return {name: tuple(column) for name, column in values.items()}

    def _places(self, path: Path, header: list[str], wanted: dict[str, Path]) -> dict[str, int]:
        if not any(header):
            self._fault(1, "the file has no header line; its first line names the columns")
            return {}
        index: dict[str, int] = {}
        for name, asked in wanted.items():
            if name not in header:
                hint = suggestion(name, header, "its columns")
                if len(header) == 1 and ";" in header[0]:
                    hint = "its cells are separated by semicolons, and commas are needed"
                self.context.fault(
                    asked, f"the file {quoted(self.context.text(path))} has no column {quoted(name)}; {hint}"
                )
            elif header.count(name) > 1:
                self._fault(1, f"the column {quoted(name)} occurs twice; rename one")
            else:
                index[name] = header.index(name)
        return index

    def _number(self, line: int, column: str, cell: str) -> float | None:
        try:
            number = float(cell) if "_" not in cell else math.nan
        except ValueError:
            number = math.nan
        if not math.isfinite(number):
            found = f"{quoted(cell.strip())} is no finite number" if cell.strip() else "the cell is empty"
            self._fault(
                line, f"column {quoted(column)}: {found}; write a number with a decimal point, such as 0.5"
            )
            return None
        return number

    def _fault(self, line: int, message: str) -> None:
        self.context.faults.append(Fault(Place(self.file, line, 1), message))
