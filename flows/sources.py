"""The command ``seawhence sources``: what a catalogue of source waters can tell, and making one from data."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from flows.records import ExitStatus
from flows.showing import aligned
from pipeline.mixing import read_catalogue
from pipeline.mixing.advice import problems, warnings
from pipeline.mixing.determinacy import determinacy
from pipeline.mixing.products import usable_together
from pipeline.problems import UsageProblem
from pipeline.settings import read_settings

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence

    from pipeline.mixing import Catalogue
    from pipeline.mixing.determinacy import Determinacy
    from pipeline.mixing.entries import SourceSet
    from pipeline.settings import Settings


@dataclass(frozen=True, slots=True)
class Judged:
    """What was found about one set."""

    name: str
    told: Determinacy | None  # None where none of its properties is left
    problems: tuple[str, ...]
    warnings: tuple[str, ...]  # what may be meant so


def sources(chosen: argparse.Namespace) -> int:
    """Do what was asked for with source waters."""
    if chosen.task == "derive":
        from flows.deriving import derive  # noqa: PLC0415 - the archive's readers are of no use to a check

        return int(derive(chosen))
    return check(chosen)


def check(chosen: argparse.Namespace) -> int:
    """Print what every set of a catalogue can tell, and return whether all can be used."""
    settings = read_settings(chosen.settings)
    catalogue = read_catalogue(chosen.catalogue)
    if chosen.properties:
        _refuse_strangers(catalogue, chosen.properties)
    judged = [_judge(catalogue, one, chosen.properties, settings) for one in catalogue.set]
    if chosen.format == "json":
        print(json.dumps(_as_json(catalogue, judged), indent=2, ensure_ascii=False))
    else:
        print("\n".join(_as_text(catalogue, judged, settings)))
    return ExitStatus.REFUSED if any(one.problems for one in judged) else ExitStatus.GOOD


def _refuse_strangers(catalogue: Catalogue, properties: Sequence[str]) -> None:
    known = list(dict.fromkeys(name for one in catalogue.set for name in one.properties))
    for name in properties:
        if name not in known:
            raise UsageProblem(
                f"--properties {name}: no set of the catalogue has this property; theirs are {', '.join(known)}."
            )


def _judge(
    catalogue: Catalogue, chosen: SourceSet, properties: Sequence[str] | None, settings: Settings
) -> Judged:
    left = usable_together([name for name in chosen.properties if not properties or name in properties])
    if not left:
        sentence = f"none of its properties is left; it needs some of {', '.join(chosen.properties)}."
        return Judged(chosen.name, None, (sentence,), ())
    told = determinacy(catalogue, chosen.model_copy(update={"properties": left}), settings)
    return Judged(
        chosen.name, told, tuple(problems(told, catalogue, settings)), tuple(warnings(told, catalogue))
    )


def _as_text(catalogue: Catalogue, judged: Sequence[Judged], settings: Settings) -> list[str]:
    n_set = len(catalogue.set)
    lines = [
        f"{catalogue.title}: {_counted(len(catalogue.source), 'source')}, {_counted(n_set, 'set')}",
        *(f"  converted  {sentence}" for sentence in catalogue.conversions),
    ]
    for one in judged:
        lines.append("")
        if one.told is None:
            lines.append(one.name)
        else:
            lines += _set_as_text(one.told, settings)
        lines += [f"  problem  {sentence}" for sentence in one.problems]
        lines += [f"  warning  {sentence}" for sentence in one.warnings]
        if one.told and len(one.told.chosen.sources) > 1 and not one.problems:
            lines.append("  good  every source can be told from the others")
    return lines


def _set_as_text(told: Determinacy, settings: Settings) -> list[str]:
    codes, propagation = told.chosen.sources, told.propagation
    respired = told.respiration_uncertainty
    unknowns = told.chosen.unknowns
    properties = _counted(len(told.chosen.properties), "property", "properties")
    lines = [
        f"{told.chosen.name}: {unknowns} from {properties} and the sum of the shares",
        (
            f"  condition number {_number(told.condition_number)} (limit {settings.mixing.condition_limit:g}),"
            f" rank {propagation.rank} of {told.n_free} (combinations of the unknowns, the sum "
            f"{'aside' if told.chosen.mass == 'exact' else 'among them'}, that are seen at all)"
        ),
        "  standard uncertainty at equal shares: of each share, and of share moved from one source to another",
        *aligned(
            [
                ("    source", "share", *codes),
                *(
                    (
                        f"    {code}",
                        _share(told.share_uncertainty[i]),
                        *("-" if i == j else _share(propagation.exchange[i, j]) for j in range(len(codes))),
                    )
                    for i, code in enumerate(codes)
                ),
            ]
        ),
    ]
    if respired is not None:
        shown = f"{respired:.3f} umol/kg of phosphate" if math.isfinite(respired) else "unknown"
        lines.append(f"    respiration  {shown}")
    dissolved = told.process_uncertainty("calcium_carbonate")
    if dissolved is not None:
        shown = f"{dissolved:.1f} umol/kg" if math.isfinite(dissolved) else "unknown"
        lines.append(f"    calcium carbonate  {shown}")
    if told.worth:
        least_last = sorted(told.worth, key=lambda worth: -worth.share_uncertainty)
        lines.append("  without one property, the one that tells most first")
        lines += aligned(
            [
                ("    left out", "condition number", "largest share uncertainty"),
                *(
                    (f"    {one.name}", _number(one.condition_number), _share(one.share_uncertainty))
                    for one in least_last
                ),
            ]
        )
    return lines


def _as_json(catalogue: Catalogue, judged: Sequence[Judged]) -> dict[str, Any]:
    return {
        "title": catalogue.title,
        "sha256": catalogue.sha256,
        "conversions": list(catalogue.conversions),
        "sets": [
            {
                "name": one.name,
                **(_set_as_json(one.told) if one.told else {"properties": []}),
                "problems": list(one.problems),
                "warnings": list(one.warnings),
            }
            for one in judged
        ],
    }


def _set_as_json(told: Determinacy) -> dict[str, Any]:
    codes, exchange = told.chosen.sources, told.propagation.exchange
    return {
        "properties": list(told.chosen.properties),
        "unknowns": told.n_unknown,
        "equations": told.n_equation,
        "rank": told.propagation.rank,
        "full_rank": told.n_free,
        "condition_number": _finite(told.condition_number),
        "share_uncertainty": {
            code: _finite(value) for code, value in zip(codes, told.share_uncertainty, strict=True)
        },
        "respiration_uncertainty": (
            None if told.respiration_uncertainty is None else _finite(told.respiration_uncertainty)
        ),
        "told_apart_to": [
            {"sources": [codes[i], codes[j]], "share": _finite(exchange[i, j])}
            for i in range(len(codes))
            for j in range(i + 1, len(codes))
        ],
        "without": [
            {
                "property": one.name,
                "condition_number": _finite(one.condition_number),
                "share_uncertainty": _finite(one.share_uncertainty),
            }
            for one in told.worth
        ],
    }


def _finite(value: float) -> float | None:
    """Return a number that JSON can hold, None for what is without bound."""
    return float(value) if math.isfinite(value) else None


def _number(value: float) -> str:
    return "infinite" if math.isinf(value) else f"{value:.1f}" if value < 100 else f"{value:.0f}"


def _share(uncertainty: float) -> str:
    """Return an uncertainty of a share, which says nothing where it is more than all."""
    return f"{uncertainty:.3f}" if uncertainty < 1 else "1+"


def _counted(number: int, one: str, many: str | None = None) -> str:
    return f"{number} {one if number == 1 else many or one + 's'}"
