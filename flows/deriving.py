"""The command ``seawhence sources derive``: a catalogue of source waters found in an archive by rules."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING

from flows.records import ExitStatus
from pipeline.archive import fingerprint, open_archive, read_contents, read_table
from pipeline.mixing.catalogue import parse_catalogue
from pipeline.mixing.deriving import RELATIVE, derive_sources, derived_catalogue
from pipeline.mixing.faults import entry_faults
from pipeline.mixing.gathering import columns_used
from pipeline.mixing.rules import read_rules
from pipeline.mixing.writing import catalogue_text, is_sealed, sealed
from pipeline.problems import ArchiveProblem, BrokenPromise, CatalogueProblem, UsageProblem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path

    import pyarrow as pa

    from pipeline.archive import CruiseContents, Store
    from pipeline.mixing.deriving import DerivedSource
    from pipeline.mixing.entries import CatalogueFile
    from pipeline.settings import Settings


def derive(chosen: argparse.Namespace) -> int:
    """Derive the catalogue, write it, and tell what every source was found from.

    Parameters
    ----------
    chosen
        ``archive``, ``rules`` and ``out`` are paths, ``settings`` is one or None.

    """
    settings = read_settings(chosen.settings)
    rules = read_rules(chosen.rules)
    _refuse_to_replace(chosen.out)
    store = open_archive(chosen.archive)
    cruises = read_contents(store).cruises
    if not cruises:
        raise ArchiveProblem(
            f"{chosen.archive}: found an archive without a cruise; expected some to find sources in; bring "
            "deliveries into it with 'seawhence run'."
        )
    troubles = [trouble for cruise in cruises.values() for trouble in cruise.troubles]
    whole = {expocode: cruise for expocode, cruise in cruises.items() if cruise.is_whole}
    tables = _tables(store, whole, columns_used(rules.rules), troubles)
    derivation = derive_sources(tables, rules.rules, settings)
    if derivation.faults:
        raise CatalogueProblem("\n".join([str(rules.problem(derivation.faults)), *troubles]))
    catalogue = derived_catalogue(
        rules.rules,
        derivation,
        _made_from([whole[expocode] for expocode in derivation.cruises]),
        _choices(settings),
    )
    if faults := entry_faults(catalogue.model_dump(mode="json", exclude_unset=True)):
        raise rules.problem(faults)
    _write(chosen.out, catalogue)
    print("\n".join(_told(derivation.sources)))
    for trouble in troubles:
        print(f"left out  {trouble}")
    print(RELATIVE)
    count = len(derivation.cruises)
    print(
        f"{len(derivation.sources)} source{'s' if len(derivation.sources) != 1 else ''} derived from {count} of "
        f"{len(cruises)} cruise{'s' if len(cruises) != 1 else ''}. The catalogue is {chosen.out}."
    )
    return ExitStatus.REFUSED if troubles else ExitStatus.GOOD


def _refuse_to_replace(out: Path) -> None:
    """Refuse an output that holds anything but a derived catalogue as it was written."""
    try:
        found = out.read_bytes()
    except FileNotFoundError:
        return
    except OSError as error:
        raise UsageProblem(
            f"{out}: the catalogue cannot be written there ({error.strerror}); give another file as --out."
        ) from error
    if not is_sealed(found):
        raise UsageProblem(
            f"{out}: found a file that was written or changed by hand; expected none, or a derived catalogue as it was "
            "written; give another file as --out, or move this one away."
        )


def _tables(
    store: Store, cruises: Mapping[str, CruiseContents], columns: Sequence[str], troubles: list[str]
) -> Iterator[pa.Table]:
    """Yield the samples of one cruise after the other; one that cannot be read is told in ``troubles``."""
    for expocode in cruises:
        try:
            yield read_table(store, expocode, "samples", columns=columns)
        except ArchiveProblem as problem:
            troubles.append(str(problem))


def _made_from(cruises: Sequence[CruiseContents]) -> str:
    """Return the hash over what the samples of cruises were made from.

    The catalogue that a cruise was resolved with is left out: no column that rules may use depends on it,
    and a catalogue derived anew after a run with itself is to be the same.
    """
    prints = {}
    for cruise in cruises:
        made = cruise.provenance
        if made is None:
            raise BrokenPromise(f"{cruise.expocode} is whole and has no provenance")
        prints[cruise.expocode] = fingerprint(
            [(file.name, file.sha256) for file in made.deliveries],
            made.settings_sha256,
            None,
            schema_version=made.schema_version,
            pipeline_version=made.pipeline_version,
        )
    return _hash(prints)


def _choices(settings: Settings) -> str:
    """Return the hash over the settings that a derivation depends on."""
    mixing = settings.mixing.model_dump(mode="json", include={"uncertainty", "mixed_layer_density"})
    return _hash({"use": settings.use.model_dump(mode="json"), **mixing})


def _hash(values: Mapping[str, object]) -> str:
    text = json.dumps(values, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode()).hexdigest()


def _write(out: Path, catalogue: CatalogueFile) -> None:
    """Write a catalogue in one step, after it was seen that it can be read back."""
    text = catalogue_text(catalogue)
    parse_catalogue(text, str(out))
    part = out.with_name(f".{out.name}.part")
    try:
        part.write_text(sealed(text), encoding="utf-8", newline="\n")
        part.replace(out)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise UsageProblem(
            f"{out}: the catalogue cannot be written ({error.strerror}); give another file as --out."
        ) from error


def _told(sources: Sequence[DerivedSource]) -> Iterator[str]:
    for one in sources:
        cruises = len(one.account.cruises)
        yield (
            f"{one.source.code}  {one.account.samples} samples of {cruises} cruise{'s' if cruises != 1 else ''}: "
            + ", ".join(f"{n} {v.value:g} +- {v.uncertainty:.2g}" for n, v in one.source.properties.items())
        )
