"""Coverage: how often the truth lies within the stated uncertainty, on invented oceans of known truth.

``python -m tests.coverage`` prints the table. Every draw is another ocean: true sources, a catalogue that
misses them by its stated uncertainties, and noisy samples, which go through the whole mixing analysis. One
catalogue shifts all its samples together, so many catalogues are drawn and few samples of each.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa

from pipeline.mixing import read_catalogue, resolve
from pipeline.mixing.entries import Catalogue, Covariance, Header, Source, SourceSet, SourceValue
from pipeline.mixing.properties import respiration_ratios
from pipeline.mixing.weights import measurement_uncertainty, mixing_problem
from pipeline.settings import MixingSettings, Settings
from pipeline.tables import registry_field

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    BoolArray = NDArray[np.bool_]

PROPERTIES = ("conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate", "silicate")
LOWEST = np.array([-1.0, 34.2, 170.0, 0.5, 8.0, 5.0])
HIGHEST = np.array([12.0, 35.6, 320.0, 2.4, 34.0, 130.0])
DEFINED = np.array([0.1, 0.01, 3.0, 0.03, 0.5, 1.5])  # standard uncertainty of a source
FIXTURES = Path(__file__).parent.parent / "fixtures" / "sources.toml"
MARGIN = 3.0  # standard uncertainties from zero at which a share counts as clear of the bound
CONDITION = 40.0  # random sources of a worse condition number are drawn again
CLASSES = (
    "interior: every share and respiration over 3 u",
    "near a bound: shares over 3 u",
    "near a bound: shares over zero, up to 3 u",
    "near a bound: shares that are zero",
)


@dataclass(frozen=True, eq=False)
class Cases:
    """What became of the shares of some samples, one row per share, and of their respiration and oxygen."""

    draw: NDArray[np.int64]  # (n_case,) which catalogue
    kind: NDArray[np.int64]  # (n_case,) a position in CLASSES
    error: FloatArray  # (n_case,) found less true
    uncertainty: FloatArray  # (n_case,)
    between: BoolArray  # (n_case,) whether the truth is between the 16th and 84th percentiles
    respiration: FloatArray  # (n_interior,) errors over uncertainties
    oxygen: FloatArray  # (n_interior,) of what the source waters brought


def fixtures_ocean(_random: np.random.Generator) -> Catalogue:
    """Return the sources of the demonstration, five of them."""
    return read_catalogue(FIXTURES)


def random_ocean(random: np.random.Generator, spread: float = 1.0, correlation: float = 0.0) -> Catalogue:
    """Return three or four random sources that the six properties can tell apart."""
    ratios = respiration_ratios(Settings().tracers)
    while True:
        values = random.uniform(LOWEST, HIGHEST, (int(random.integers(3, 5)), len(PROPERTIES)))
        uncertainties = DEFINED * spread * random.uniform(0.5, 1.5, values.shape)
        made = _catalogue(values, uncertainties, correlation)
        problem = mixing_problem(made, made.set[0], ratios)
        singular = np.linalg.svd((problem.design * problem.weight), compute_uv=False)
        if singular[0] / singular[len(values) - 1] < CONDITION:
            return made


def _catalogue(values: FloatArray, uncertainties: FloatArray, correlation: float) -> Catalogue:
    sources = []
    for index, (row, own) in enumerate(zip(values, uncertainties, strict=True)):
        entries = {
            name: SourceValue(value=float(value), uncertainty=float(one))
            for name, value, one in zip(PROPERTIES, row, own, strict=True)
        }
        matrix = np.outer(own, own) * (correlation + (1 - correlation) * np.eye(len(own)))
        covariance = Covariance(properties=PROPERTIES, matrix=tuple(tuple(map(float, r)) for r in matrix))
        sources.append(
            Source(
                code=f"W{index}",
                name=f"Water {index}",
                properties=entries,
                covariance=covariance if correlation else None,
            )
        )
    return Catalogue(
        catalogue=Header(title="Drawn at random", reference="no real ocean"),
        source=tuple(sources),
        set=(
            SourceSet(
                name="all",
                sources=tuple(one.code for one in sources),
                properties=PROPERTIES,
                respiration="non_negative",
            ),
        ),
    )


OCEANS: Mapping[str, Callable[[np.random.Generator], Catalogue]] = {
    "five sources of the demonstration": fixtures_ocean,
    "three or four random sources": random_ocean,
    "the same, errors of a source correlated by 0.6": lambda random: random_ocean(random, 1.0, 0.6),
    "the same, sources three times as uncertain": lambda random: random_ocean(random, 3.0),
}


def missed(truth: Catalogue, random: np.random.Generator) -> Catalogue:
    """Return a catalogue whose values miss the true sources by the uncertainties it states."""
    sources = []
    for source in truth.source:
        names = list(source.properties)
        off = np.linalg.cholesky(source.covariance_of(names)) @ random.normal(size=len(names))
        entries = {
            name: SourceValue(value=one.value + float(by), uncertainty=one.uncertainty)
            for (name, one), by in zip(source.properties.items(), off, strict=True)
        }
        sources.append(source.model_copy(update={"properties": entries}))
    return truth.model_copy(update={"source": tuple(sources)})


def draw(
    truth: Catalogue, random: np.random.Generator, *, number: int, samples: int, settings: Settings
) -> Cases:
    """Return the cases of one catalogue and ``samples`` samples of its ocean."""
    chosen = truth.set[0]
    true = mixing_problem(truth, chosen, respiration_ratios(settings.tracers))
    spread = np.where(np.arange(samples) % 2, 4.0, 0.5)[:, None]  # half of them well mixed, half not
    gamma = random.gamma(spread, size=(samples, len(chosen.sources)))
    shares = gamma / gamma.sum(axis=1, keepdims=True)
    shares[shares < 1e-3] = 0.0
    shares /= shares.sum(axis=1, keepdims=True)
    respiration = random.uniform(0.0, 0.6, samples)
    values = shares @ true.sources + respiration[:, None] * true.processes[0]
    measured = values + random.normal(size=values.shape) * measurement_uncertainty(chosen.properties, values)
    answer = resolve(_table(number, chosen.properties, measured), missed(truth, random), settings)

    solved = answer.columns["mixing_status"] == "solved"
    u = _shares(answer.mixtures, "share_uncertainty", shares.shape[1])
    found, true_shares = _shares(answer.mixtures, "share", shares.shape[1]), shares[solved]
    low, high = (_shares(answer.mixtures, name, shares.shape[1]) for name in ("share_p16", "share_p84"))
    by = {name: np.asarray(values, dtype=float)[solved] for name, values in _numbers(answer.columns)}
    # Where the bounds are is judged by the truth alone: to judge by u, which the catalogue drawn decides,
    # would favour the catalogues in which it comes out small.
    expected = resolve(_table(number, chosen.properties, values), truth, settings)
    clear = shares > MARGIN * _shares(expected.mixtures, "share_uncertainty", shares.shape[1])
    breathes = respiration > MARGIN * expected.columns["respiration_uncertainty"]
    clear, breathes = clear[solved], breathes[solved]
    interior = clear.all(axis=1) & breathes
    kind = np.where(clear, 1, np.where(true_shares > 0, 2, 3))
    kind[interior] = 0
    oxygen = chosen.properties.index("oxygen")
    errors = {
        "respiration": by["respiration"] - respiration[solved],
        "oxygen_from_sources": by["oxygen_from_sources"] - true_shares @ true.sources[:, oxygen],
    }
    in_uncertainties = {
        name: off[interior] / by[f"{name}_uncertainty"][interior] for name, off in errors.items()
    }
    return Cases(
        draw=np.full(kind.size, number),
        kind=kind.ravel(),
        error=(found - true_shares).ravel(),
        uncertainty=u.ravel(),
        between=((low <= true_shares) & (true_shares <= high)).ravel(),
        respiration=in_uncertainties["respiration"],
        oxygen=in_uncertainties["oxygen_from_sources"],
    )


def _table(number: int, properties: Sequence[str], values: FloatArray) -> pa.Table:
    n_sample = len(values)
    columns = {
        "expocode": ["ZZV120090214"] * n_sample,
        "station": [str(number)] * n_sample,
        "cast": [1] * n_sample,
        "sample": [str(i) for i in range(n_sample)],
        "line": list(range(n_sample)),
        "pressure": [3000.0] * n_sample,
        **dict(zip(properties, values.T, strict=True)),
    }
    fields = [registry_field(name) for name in columns]
    return pa.table([pa.array(columns[f.name], type=f.type) for f in fields], schema=pa.schema(fields))


def _shares(mixtures: pa.Table, name: str, n_source: int) -> FloatArray:
    return np.asarray(mixtures.column(name).to_numpy()).reshape(-1, n_source)


def _numbers(columns: Mapping[str, object]) -> Iterator[tuple[str, object]]:
    wanted = (
        "respiration",
        "respiration_uncertainty",
        "oxygen_from_sources",
        "oxygen_from_sources_uncertainty",
    )
    return ((name, columns[name]) for name in wanted)


def cases_of(ocean: str, *, draws: int, samples: int, members: int = 100, seed: int = 20_261_201) -> Cases:
    """Return the cases of ``draws`` catalogues of an ocean, ``samples`` samples each."""
    random = np.random.default_rng(seed)
    settings = Settings(mixing=MixingSettings(members=members))
    parts = [
        draw(OCEANS[ocean](random), random, number=number, samples=samples, settings=settings)
        for number in range(draws)
    ]
    return Cases(*(np.concatenate([getattr(part, name) for part in parts]) for name in vars(parts[0])))


def within(cases: Cases, kind: int, uncertainties: float) -> tuple[float, float]:
    """Return the part of a kind's shares within so many uncertainties of the truth, and its standard error."""
    chosen = cases.kind == kind
    inside = np.abs(cases.error[chosen]) <= uncertainties * cases.uncertainty[chosen]
    return _part(inside, cases.draw[chosen])


def _part(inside: BoolArray, draws: NDArray[np.int64]) -> tuple[float, float]:
    """Return a part, and its standard error where all cases of a draw may go together."""
    if not inside.size:
        return float("nan"), float("nan")
    part = float(inside.mean())
    together = np.bincount(draws, weights=inside - part)
    return part, float(np.sqrt((together**2).sum()) / inside.size)


def table_of(ocean: str, cases: Cases) -> list[str]:
    """Return the rows of one ocean."""
    lines = []
    for kind, words in enumerate(CLASSES):
        chosen = cases.kind == kind
        between = _part(cases.between[chosen], cases.draw[chosen])
        cells = [
            f"{100 * part:.1f} ± {100 * error:.1f} %"
            for part, error in (within(cases, kind, 1.0), within(cases, kind, 2.0), between)
        ]
        lines.append(f"| {ocean} | {words} | {chosen.sum()} | {' | '.join(cells)} |")
    for words, ratio in (("respiration", cases.respiration), ("oxygen from sources", cases.oxygen)):
        cells = [f"{100 * (np.abs(ratio) <= k).mean():.1f} %" for k in (1, 2)]
        lines.append(f"| {ocean} | interior: {words} | {ratio.size} | {' | '.join(cells)} | |")
    return lines


def main() -> None:
    """Draw and print."""
    parser = argparse.ArgumentParser(prog="python -m tests.coverage", description=__doc__)
    parser.add_argument("--draws", type=int, default=250, help="catalogues per ocean")
    parser.add_argument("--samples", type=int, default=80, help="samples per catalogue")
    options = parser.parse_args()
    lines = [
        "| ocean | shares of samples | cases | within 1 u | within 2 u | between p16 and p84 |",
        "|---|---|---|---|---|---|",
    ]
    for ocean in OCEANS:
        lines += table_of(ocean, cases_of(ocean, draws=options.draws, samples=options.samples))
    print("\n".join(lines))  # noqa: T201 - what the command is for


if __name__ == "__main__":
    main()
