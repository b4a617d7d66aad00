"""An archive as an analyst opens it: tables over many cruises, read when asked for and no more of them than needed.

archive = pipeline.open_archive("archive")
deep = archive.table("samples", columns=["station", "aou"], filter=[("pressure", ">", 2000)])
deep.to_pandas()
"""

from __future__ import annotations

import difflib
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import pyarrow as pa
import pyarrow.dataset as ds
import pyarrow.parquet as pq
from pyarrow import fs

from pipeline.archive import layout, read_cruise, revisions
from pipeline.archive import open_archive as open_store
from pipeline.archive.footers import Footer, read_footer
from pipeline.archive.provenance import RECORD, Provenance
from pipeline.archive.refusals import refused
from pipeline.problems import ArchiveProblem, UsageProblem
from pipeline.tables import TABLE_NAMES, arranged

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence
    from pathlib import Path

    import pandas as pd
    import polars as pl

    from pipeline.archive import Store

_FORMAT = ds.ParquetFileFormat()
_MOST_NAMED = 8


@dataclass(frozen=True)
class View:
    """Some rows and columns of a table of the archive. Nothing is read before a ``to_...`` or ``count_rows``."""

    dataset: ds.Dataset  # all columns of the cruises, and those asked for that they do not have; filtered
    columns: tuple[str, ...]

    @property
    def schema(self) -> pa.Schema:
        """The columns with their metadata: units, standard_name, long_name, source."""
        fields = [self.dataset.schema.field(name) for name in self.columns]
        return pa.schema(fields, metadata=self.dataset.schema.metadata)

    def count_rows(self) -> int:
        """Return how many rows there are."""
        return int(self.dataset.count_rows())

    def to_arrow(self) -> pa.Table:
        """Return the rows as an Arrow table, with the metadata of its fields, in the order of the cruises."""
        return self.dataset.to_table(columns=list(self.columns)).cast(self.schema)

    def to_pandas(self) -> pd.DataFrame:
        """Return the rows as a data frame; ``frame.attrs["units"]`` has the units by column."""
        table = self.to_arrow()
        frame: pd.DataFrame = table.replace_schema_metadata(None).to_pandas()
        frame.attrs["units"] = {one.name: _text(one, "units") for one in table.schema if _text(one, "units")}
        return frame

    def to_polars(self) -> pl.LazyFrame:
        """Return the rows as a lazy frame, which reads only what its query needs.

        Raises
        ------
        UsageProblem
            If Polars is not installed.

        """
        try:
            import polars  # noqa: ICN001, PLC0415 - not a dependency: for whoever has it
        except ImportError as error:
            raise UsageProblem(
                "polars is not installed here; install it with: pip install polars."
            ) from error
        return polars.scan_pyarrow_dataset(self.dataset).select(self.columns)


@dataclass(frozen=True)
class Archive:
    """An archive that is read. What is in it is looked up once: open it again after a run."""

    store: Store = field(repr=False)
    place: str

    @cached_property
    def cruises(self) -> tuple[str, ...]:
        """The expocodes of all cruises, in order."""
        found: set[str] = set()
        for table in TABLE_NAMES:
            found.update(layout.cruises_in(self.store.names(table))[0])
        return tuple(sorted(found))

    @property
    def tables(self) -> tuple[str, ...]:
        """The names of the tables."""
        return TABLE_NAMES

    def table(
        self,
        name: str,
        *,
        cruises: Iterable[str] | None = None,
        columns: Sequence[str] | None = None,
        filter: ds.Expression | list[Any] | None = None,  # noqa: A002 - what it is called everywhere
        revision: int | None = None,
    ) -> View:
        """Return a table of some cruises, one below the other.

        A column that some of them do not have is missing there.

        Parameters
        ----------
        name
            ``samples``, ``casts``, ``mixtures``, ``findings`` or ``rejects``.
        cruises
            Expocodes; all by default.
        columns
            Names; all that any of the cruises has by default.
        filter
            Which rows, as a pyarrow expression or as ``[("pressure", ">", 2000), ...]``, all of which hold; of a list
            of such lists one has to hold. Whole parts of files where none can hold are not read.
        revision
            An earlier one, of a single cruise.

        Raises
        ------
        UsageProblem
            If there is no such table, cruise, column or revision.
        ArchiveProblem
            If a file is missing or damaged.

        """
        if name not in TABLE_NAMES:
            raise UsageProblem(
                f"{self.place}: there is no table '{name}'; its tables are: {', '.join(TABLE_NAMES)}."
            )
        chosen = self._chosen(cruises)
        if revision is not None and len(chosen) != 1:
            raise UsageProblem(
                f"{self.place}: revision {revision} is asked for; name the one cruise it is of."
            )
        keys = [self._key(cruise, name, revision) for cruise in chosen]
        schemas = [self._schema(key) for key in keys]
        schema = united(schemas, name)
        for column in dict.fromkeys(columns or ()):
            if column not in schema.names:
                schema = schema.append(self._elsewhere(name, column, chosen))
        dataset = ds.FileSystemDataset([self._fragment(key) for key in keys], schema, _FORMAT)
        if filter is not None:
            dataset = self._filtered(dataset, filter, name)
        return View(dataset, tuple(schema.names if columns is None else dict.fromkeys(columns)))

    def findings(self, cruise: str) -> View:
        """Return what checks noticed in a cruise."""
        return self.table("findings", cruises=[cruise])

    def provenance(self, cruise: str, revision: int | None = None) -> Provenance:
        """Return what a cruise's tables were made from.

        Raises
        ------
        UsageProblem
            If there is no such cruise or revision.
        ArchiveProblem
            If its tables are not whole.

        """
        self._chosen([cruise])
        if revision is not None:
            return Provenance.from_metadata(
                self._schema(self._key(cruise, "samples", revision)).metadata, cruise
            )
        found = read_cruise(self.store, cruise)
        if not found.is_whole or found.provenance is None:
            raise ArchiveProblem(" ".join(found.troubles))
        return found.provenance

    def revisions(self, cruise: str) -> tuple[int, ...]:
        """Return the whole revisions of a cruise that can be read, the published one last."""
        self._chosen([cruise])
        return revisions(self.store, cruise)

    def _chosen(self, cruises: Iterable[str] | None) -> tuple[str, ...]:
        if cruises is None:
            return self.cruises
        chosen = (cruises,) if isinstance(cruises, str) else tuple(dict.fromkeys(cruises))
        for cruise in chosen:
            if cruise not in self.cruises:
                raise UsageProblem(
                    f"{self.place}: there is no cruise '{cruise}'; {_near(cruise, self.cruises, 'its cruises are')}."
                )
        return chosen

    def _key(self, cruise: str, table: str, revision: int | None) -> str:
        key = layout.table_key(table, cruise)
        if revision is None:
            return key
        footer = read_footer(self.store, key)
        if isinstance(footer, Footer) and footer.mark.revision == revision:
            return key
        there = self.revisions(cruise)
        if revision not in there:
            raise UsageProblem(
                f"{self.place}: {cruise} has no revision {revision} that can be read; there are:"
                f" {', '.join(map(str, there)) or 'none'}."
            )
        return layout.superseded_key(cruise, revision, table)

    def _schema(self, key: str) -> pa.Schema:
        place = self.store.where(key)
        with refused(place, "read"):
            try:
                return pq.read_schema(self.store.source(key))
            except FileNotFoundError as error:
                raise ArchiveProblem(
                    f"{place}: this table is not published: a run was cut short or files were removed; run again to"
                    " make it anew, or leave the cruise out."
                ) from error
            except pa.ArrowException as error:
                raise ArchiveProblem(
                    f"{place}: damaged, it cannot be read; remove it and run again to make it anew, or leave the cruise"
                    " out."
                ) from error

    def _fragment(self, key: str) -> ds.Fragment:
        source = self.store.source(key)
        return _FORMAT.make_fragment(
            source, filesystem=fs.LocalFileSystem() if isinstance(source, str) else None
        )

    def _elsewhere(self, table: str, column: str, chosen: Sequence[str]) -> pa.Field:
        """Return the field of a column that the chosen cruises do not have and another one has."""
        names: list[str] = []
        for cruise in self.cruises:
            schema = self._schema(layout.table_key(table, cruise))
            if column in schema.names:
                return schema.field(column)
            if cruise in chosen:
                names += schema.names
        raise UsageProblem(
            f"{self.place}: no cruise has a column '{column}' in {table};"
            f" {_near(column, list(dict.fromkeys(names)), 'its columns are')}."
        )

    def _filtered(self, dataset: ds.Dataset, asked: ds.Expression | list[Any], table: str) -> ds.Dataset:
        try:
            wanted = asked if isinstance(asked, ds.Expression) else pq.filters_to_expression(asked)
            dataset.scanner(columns=[], filter=wanted)  # so that what is wrong is told here
        except (pa.ArrowException, ValueError, TypeError, KeyError) as error:
            said = str(error).partition("\n")[0].partition(" in expocode:")[0].rstrip(". ")
            raise UsageProblem(
                f"{self.place}: the filter of {table} cannot be used ({said}); expected columns of the table, such as"
                ' [("pressure", ">", 2000)].'
            ) from error
        return dataset.filter(wanted)


def open_archive(place: Path | str) -> Archive:
    """Open an archive for reading.

    Parameters
    ----------
    place
        The archive, as ``seawhence run --archive`` was given it.

    Raises
    ------
    ArchiveProblem
        If there is none.

    """
    return Archive(open_store(place), str(place))


def united(schemas: Sequence[pa.Schema], table: str) -> pa.Schema:
    """Return a schema that has every column of several, in the order that tables have.

    A column of several types is of numbers where all are, else text. What the fields' metadata say alike stays as it
    is; texts that differ from cruise to cruise are joined by `` | ``.
    """
    found: dict[str, list[pa.Field]] = {}
    for schema in schemas:
        for one in schema:
            found.setdefault(one.name, []).append(one)
    fields = pa.schema(
        [pa.field(name, _type(each), metadata=_metadata(each)) for name, each in found.items()]
    )
    metadata = schemas[0].metadata if len(schemas) == 1 else {f"{RECORD}.table": table}
    ordered = (
        fields if table in {"findings", "rejects", "mixtures"} else arranged(fields.empty_table()).schema
    )
    return ordered.with_metadata(metadata)


def _type(fields: Sequence[pa.Field]) -> pa.DataType:
    types = list(dict.fromkeys(one.type for one in fields))
    if len(types) == 1:
        return types[0]
    numbers = all(pa.types.is_integer(kind) or pa.types.is_floating(kind) for kind in types)
    return pa.float64() if numbers else pa.string()


def _metadata(fields: Sequence[pa.Field]) -> dict[bytes, bytes]:
    names = dict.fromkeys(name for one in fields for name in one.metadata or {})
    return {
        name: b" | ".join(
            dict.fromkeys(one.metadata[name] for one in fields if one.metadata and name in one.metadata)
        )
        for name in names
    }


def _text(one: pa.Field, name: str) -> str:
    return str((one.metadata or {}).get(name.encode(), b"").decode())


def _near(wanted: str, known: Sequence[str], words: str) -> str:
    """Return the names that come near, else what there is."""
    if close := difflib.get_close_matches(wanted, known, n=3, cutoff=0.7):
        return f"near it come: {', '.join(close)}"
    more = f" and {len(known) - _MOST_NAMED} more" if len(known) > _MOST_NAMED else ""
    return f"{words}: {', '.join(known[:_MOST_NAMED]) or 'none'}{more}"
