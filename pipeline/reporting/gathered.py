"""What a page is made from: the tables of one cruise, its provenance, and its source waters in their order."""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from pydantic import ValidationError

from pipeline.archive import CruiseContents, Provenance, read_table, revisions, vault
from pipeline.mixing import Catalogue
from pipeline.problems import ArchiveProblem, BrokenPromise
from pipeline.reporting.colours import source_looks
from pipeline.reporting.thinning import thinned
from pipeline.tables import floats, texts
from pipeline.usable import Rows, usable

if TYPE_CHECKING:
    import pyarrow as pa
    from numpy.typing import NDArray

    from pipeline.archive import Store
    from pipeline.mixing.entries import Source
    from pipeline.reporting.colours import SourceLook
    from pipeline.settings import UseSettings

    FloatArray = NDArray[np.float64]


MOST_LEVELS = 5_000  # CTD levels that stand for samples where there are none


@dataclass(frozen=True, slots=True)
class Shares:
    """Shares and their uncertainties by sample and source, (n_sample, n_source), NaN where there is none."""

    share: FloatArray
    uncertainty: FloatArray


@dataclass(frozen=True)
class Gathered:
    """One cruise as it is shown. The tables are the archive's."""

    expocode: str
    provenance: Provenance
    earlier: tuple[int, ...]  # revisions that can still be read
    samples: pa.Table
    casts: pa.Table
    mixtures: pa.Table
    findings: pa.Table
    rejects: pa.Table
    sources: tuple[SourceLook, ...]
    use: UseSettings

    @cached_property
    def bottles(self) -> Rows:
        """The samples, with what flags and checks let be used."""
        return Rows(self.samples, self.use)

    @property
    def samples_are_bottles(self) -> bool:
        """Whether ``samples`` holds bottle samples, and not CTD levels in their place."""
        return "sample" in self.samples.column_names

    @property
    def is_resolved(self) -> bool:
        """Whether any sample is resolved into source waters."""
        return bool(np.isfinite(self.shares.share).any())

    def usable_levels(self, levels: pa.Table, name: str) -> FloatArray:
        """Return what may be used of a column of CTD levels, (n_level,)."""
        return usable(levels, name, self.use)

    @cached_property
    def shares(self) -> Shares:
        """The mixtures, laid beside the samples."""
        keys = ("station", "cast", "sample", "line")
        rows = {key: row for row, key in enumerate(_keys(self.samples, keys))}
        codes = {look.code: number for number, look in enumerate(self.sources)}
        share = np.full((self.samples.num_rows, len(codes)), np.nan)
        uncertainty = share.copy()
        values, spreads = floats(self.mixtures, "share"), floats(self.mixtures, "share_uncertainty")
        for place, (key, code) in enumerate(
            zip(_keys(self.mixtures, keys), texts(self.mixtures, "source"), strict=True)
        ):
            if key not in rows or code not in codes:
                raise BrokenPromise(
                    f"{self.expocode}: the share {place} of '{code}' is of no sample, or no source"
                )
            share[rows[key], codes[code]] = values[place]
            uncertainty[rows[key], codes[code]] = spreads[place]
        return Shares(share, uncertainty)


def gather(store: Store, cruise: CruiseContents, use: UseSettings) -> Gathered:
    """Read all of a whole cruise.

    Raises
    ------
    ArchiveProblem
        If a table cannot be read.

    """
    made = cruise.provenance
    if made is None or not cruise.is_whole:
        raise ArchiveProblem(" ".join(cruise.troubles))
    samples, casts, mixtures, findings, rejects = (
        read_table(store, cruise.expocode, table)
        for table in ("samples", "casts", "mixtures", "findings", "rejects")
    )
    if not samples.num_rows and casts.num_rows:  # a cruise of CTD casts alone: its levels stand for samples
        samples = thinned(casts, MOST_LEVELS)
    used = list(dict.fromkeys(code for code in texts(mixtures, "source") if code))
    return Gathered(
        expocode=cruise.expocode,
        provenance=made,
        earlier=tuple(number for number in revisions(store, cruise.expocode) if number != made.revision),
        samples=samples,
        casts=casts,
        mixtures=mixtures,
        findings=findings,
        rejects=rejects,
        sources=source_looks(_catalogue_sources(store, made, used)),
        use=use,
    )


def _catalogue_sources(
    store: Store, made: Provenance, used: list[str]
) -> list[tuple[str, str, float, float]]:
    """Return what ``source_looks`` takes, in the catalogue's order; without it, of the mixtures, as they come.

    The names are an adornment: a catalogue that is no longer kept, or that an older version wrote otherwise, is
    no reason to have no page.
    """
    unknown = {code: (code, code, np.nan, np.nan) for code in used}
    if made.catalogue_sha256 is None:
        return list(unknown.values())
    try:
        catalogue = Catalogue.model_validate(json.loads(vault.read(store, made.catalogue_sha256)))
    except (ArchiveProblem, ValidationError, ValueError):
        return list(unknown.values())
    known = {source.code: _with_place(source) for source in catalogue.source}
    return [{**unknown, **known}[code] for code in dict.fromkeys([*known, *unknown])]


def _with_place(source: Source) -> tuple[str, str, float, float]:
    salinity, temperature = (
        source.properties[name].value if name in source.properties else np.nan
        for name in ("preformed_salinity", "conservative_temperature")
    )
    return source.code, source.name, salinity, temperature


def _keys(table: pa.Table, names: tuple[str, ...]) -> list[tuple[object, ...]]:
    columns = [
        table.column(name).to_pylist() if name in table.column_names else [None] * table.num_rows
        for name in names
    ]
    return list(zip(*columns, strict=True))
