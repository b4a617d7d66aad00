"""The variables of a CF file as columns of cells, one cell a row, with what they mean beside them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from pipeline.findings import Finding, Severity
from pipeline.reading.cf_decoding import decode_numbers, decode_texts, decode_times, is_text
from pipeline.reading.cf_flags import flag_numbers, read_flags
from pipeline.reading.cf_profiles import tells_layout
from pipeline.reading.spread import Spread
from pipeline.variables import REGISTRY, Kind, Variable

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from pipeline.reading.cf_flags import FlagColumn
    from pipeline.reading.cf_names import Recognised
    from pipeline.reading.cf_profiles import Layout
    from pipeline.reading.netcdf_bytes import StoredFile, StoredVariable

# What a cast has one of, and files may give of its start, bottom and end.
_OF_A_CAST = frozenset({"latitude", "longitude", "time", "bottom_depth"})
_MOST_NAMED = 12


@dataclass
class CellColumns:
    """Columns of n_row cells by their delivered name, and what they mean."""

    names: list[str] = field(default_factory=list)
    units: list[str] = field(default_factory=list)
    cells: list[Any] = field(default_factory=list)  # float64 or text, (n_row,)
    values: dict[str, Variable] = field(default_factory=dict)
    flags: dict[str, Variable] = field(default_factory=dict)
    words: dict[str, str] = field(default_factory=dict)  # of made columns of flags: how they were made
    flag_of: dict[str, str] = field(default_factory=dict)  # and the delivered variable they were made of
    instants: set[str] = field(default_factory=set)  # variables of time that became date and time of day
    findings: list[Finding | Spread] = field(default_factory=list)

    def add(self, name: str, unit: str, cells: NDArray[Any], means: Variable | None = None) -> None:
        """Add a column."""
        self.names.append(name)
        self.units.append(unit)
        self.cells.append(cells)
        if means is not None:
            self.values[name] = means

    def column(self, name: str) -> NDArray[Any]:
        """Return the cells of a column."""
        return np.asarray(self.cells[self.names.index(name)])


def lay_out(name: str, file: StoredFile, layout: Layout, recognised: Recognised) -> CellColumns:
    """Return every variable that lies along the rows, decoded; the others are told of.

    Parameters
    ----------
    name
        The file, for sentences.
    file
        Its variables.
    layout
        How profiles lie in them.
    recognised
        What they mean.

    """
    columns = CellColumns()
    left_out = []
    for title, variable in file.variables.items():
        means = recognised.values.get(title)
        if tells_layout(variable):
            continue
        if means is not None and means.kind is Kind.TIME:
            laid = _lay_time(name, columns, layout, variable, recognised)
        elif is_text(variable):
            texts = decode_texts(variable)
            laid = _lay(name, columns, layout, variable, texts, means)
        else:
            laid = _lay_numbers(name, columns, layout, variable, recognised)
        if not laid:
            left_out.append(title)
    if left_out or file.odd:
        columns.findings.append(_left_out(name, [*left_out, *file.odd], layout))
    return columns


def _lay_numbers(
    name: str, columns: CellColumns, layout: Layout, variable: StoredVariable, recognised: Recognised
) -> bool:
    means = recognised.values.get(variable.name)
    decoded = decode_numbers(variable)
    if decoded.problem:
        columns.findings.append(
            Finding(
                "packing", Severity.FAULT,
                f"{name}: {variable.name} cannot be unpacked: {decoded.problem}; expected a number; it is kept packed"
                " and unused.",
                variable=means.name if means else None, value=decoded.problem, file=name,
            )
        )  # fmt: skip
        means = None
    if decoded.invalid.any():
        columns.findings.append(_outside(name, layout, variable, decoded.invalid, means))
    values: NDArray[Any] = decoded.values
    if means is not None and means.kind is not Kind.NUMBER:
        values = np.array([_whole_text(number) for number in values.ravel()], dtype=object).reshape(
            values.shape
        )
    return _lay(name, columns, layout, variable, values, means, recognised.units.get(variable.name))


def _outside(
    name: str, layout: Layout, variable: StoredVariable, invalid: NDArray[np.bool_], means: Variable | None
) -> Finding | Spread:
    """Tell how many values are outside the range that the file gives for them."""
    quantity, title = means.name if means else None, variable.name

    def tell(count: int) -> Finding:
        values = "1 value" if count == 1 else f"{count} values"
        return Finding(
            "outside-valid-range", Severity.DOUBT,
            f"{name}: {values} of {title} {'is' if count == 1 else 'are'} outside the valid range that the file gives"
            f" for it; {'it counts' if count == 1 else 'they count'} as missing.",
            variable=quantity, value=title, file=name, count=count,
        )  # fmt: skip

    rows = layout.rows(variable.dimensions, invalid) if layout.spanned(variable) else None
    if rows is None:
        return tell(int(np.count_nonzero(invalid)))
    return Spread(np.flatnonzero(rows).astype(np.int64) + 1, lambda lines: tell(len(lines)))


def _whole_text(number: float) -> str:
    return "" if np.isnan(number) else f"{number:.15g}"


def _lay(
    name: str, columns: CellColumns, layout: Layout, variable: StoredVariable, values: NDArray[Any],
    means: Variable | None, unit: str | None = None,
) -> bool:  # fmt: skip
    """Add a variable as a column, if it lies along the rows or the cast has one of it."""
    dimensions = variable.dimensions[: values.ndim]  # the length of texts is gone
    cells = layout.rows(dimensions, values)
    if cells is None and means is not None and means.name in _OF_A_CAST and values.dtype.kind == "f":
        middle = _middle(means.name, values)
        cells = np.full(layout.n_row, middle)
        columns.findings.append(_one_of_several(name, variable, values.size, means.name, f"{middle:g}"))
    if cells is None:
        return False
    columns.add(variable.name, variable.text("units") if unit is None else unit, cells, means)
    return True


def _lay_time(
    name: str, columns: CellColumns, layout: Layout, variable: StoredVariable, recognised: Recognised
) -> bool:
    """Add instants as a date and a time of day; where they cannot be read, the numbers as they are."""
    if not is_text(variable) and " since " not in variable.text("units").lower():
        return _lay_numbers(
            name, columns, layout, variable, recognised
        )  # a time of day, as exchange files have it
    times = decode_times(variable)
    for words, severity in ((times.problem, Severity.FAULT), (times.odd, Severity.DOUBT)):
        if words:
            columns.findings.append(
                Finding(
                    "time-unit", severity,
                    f"{name}: {variable.name} is a time, and {words}; expected a unit such as 'seconds since 2009-02-14"
                    f" 00:00:00' (UTC){'; date and time count as missing' if severity is Severity.FAULT else ''}.",
                    variable="time", value=variable.text("units"), file=name,
                )
            )  # fmt: skip
            break
    if times.problem:
        values = decode_texts(variable) if is_text(variable) else decode_numbers(variable).values
        return _lay(name, columns, layout, variable, values, None)
    instants = layout.rows(variable.dimensions[: times.values.ndim], times.values)
    if instants is None:
        known = np.sort(times.values[~np.isnat(times.values)])
        middle = known[len(known) // 2] if len(known) else np.datetime64("NaT", "s")
        instants = np.full(layout.n_row, middle)
        columns.findings.append(_one_of_several(name, variable, times.values.size, "time", str(middle)))
    texts = np.array(
        ["" if text == "NaT" else text for text in np.datetime_as_string(instants, unit="s")], dtype=object
    )
    columns.add(variable.name, "", texts)
    columns.instants.add(variable.name)
    for part, cut in (("date", slice(0, 10)), ("time", slice(11, 19))):
        columns.add(
            f"{part} (of {variable.name})",
            "",
            np.array([t[cut] for t in texts], dtype=object),
            REGISTRY[part],
        )
    return True


def _middle(quantity: str, values: NDArray[Any]) -> float:
    """Return the median, of longitudes so that a cast on the date line is where it is."""
    known = values[np.isfinite(values)]
    if not known.size:
        return float("nan")
    if quantity != "longitude":
        return float(np.median(known))
    away = np.median((known - known[0] + 180.0) % 360.0 - 180.0)
    return float((known[0] + away + 180.0) % 360.0 - 180.0) if away else float(known[0])


def _one_of_several(name: str, variable: StoredVariable, count: int, quantity: str, middle: str) -> Finding:
    return Finding(
        "several-of-one", Severity.NOTE,
        f"{name}: {variable.name} gives {count} values of {quantity} along {', '.join(variable.dimensions)} for one"
        f" cast; the median, {middle}, was taken for all its rows.",
        variable=quantity, value=middle, file=name,
    )  # fmt: skip


def _left_out(name: str, titles: list[str], layout: Layout) -> Finding:
    more = f" and {len(titles) - _MOST_NAMED} more" if len(titles) > _MOST_NAMED else ""
    return Finding(
        "not-along-rows", Severity.NOTE,
        f"{name}: {', '.join(titles[:_MOST_NAMED])}{more}: not along {' and '.join(layout.dimensions) or 'the rows'},"
        " or neither number nor text; not kept in the table (the delivered file is).",
        value=", ".join(titles)[:200], file=name, count=len(titles),
    )  # fmt: skip


def lay_out_flags(
    name: str, columns: CellColumns, layout: Layout, flags: list[FlagColumn], file: StoredFile
) -> None:
    """Add the flags of quantities as WHP flags; those that are WHP as delivered, in the place of the delivered ones."""
    for flag in flags:
        title = next((title for title, means in columns.values.items() if means.name == flag.quantity), None)
        if title is None:
            continue
        of = file.variables[title]
        cells = layout.rows(flag.variable.dimensions, flag_numbers(flag.variable, of.dimensions))
        if cells is None:
            continue
        values = columns.column(title)
        present = ~np.isnan(values) if values.dtype.kind == "f" else values != ""
        read = read_flags(name, flag, np.asarray(cells, dtype=np.float64), present)
        columns.findings += read.findings
        made = f"{flag.variable.name} of {title}, as WHP flags"
        columns.add(made, "", read.whp)
        columns.flags[made] = REGISTRY[flag.quantity]
        columns.words[made], columns.flag_of[made] = read.words, flag.variable.name


def used_rows(columns: CellColumns, layout: Layout, file: StoredFile) -> NDArray[np.bool_]:
    """Return the rows that hold any number of a quantity of their own, (n_row,); the others are storage unused."""
    used = np.zeros(layout.n_row, dtype=bool)
    for title, means in columns.values.items():
        cells = columns.column(title)
        own = title in file.variables and layout.spanned(file.variables[title])
        if own and cells.dtype.kind == "f" and means.name not in {"latitude", "longitude", "bottom_depth"}:
            used |= ~np.isnan(cells)
    return used


def as_cells(cells: NDArray[Any]) -> pa.Array:
    """Return cells as an Arrow column: numbers, NaN where missing, or trimmed text."""
    if cells.dtype.kind == "f":
        return pa.array(np.ascontiguousarray(cells))
    return pa.array([str(text).strip() for text in cells.tolist()], type=pa.string())
