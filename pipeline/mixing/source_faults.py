"""What is wrong with a single source of sound form: its code, its properties, its covariance, its gaps."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.mixing.conversion import MADE_FROM, has_counterpart, obstacle
from pipeline.mixing.magnitudes import impossible
from pipeline.mixing.properties import LISTED_AS, PROPERTIES
from pipeline.mixing.tags import Tag
from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pipeline.mixing.entries import ReferenceState, Source, SourceSet
    from pipeline.mixing.form import Location

# Printed covariances are rounded.
_DIAGONAL = 0.01  # of a standard uncertainty
_SYMMETRY = 1e-4  # of a correlation
_SMALLEST = 1e-9  # eigenvalue of the correlations: below, a combination would be known without any doubt


def source_faults(source: Source) -> Iterator[tuple[Location, str]]:
    """Yield what is wrong with a source, with its place in it."""
    if source.code.lower() in set(Tag):
        yield (
            ("code",),
            f"found a code that is a tag for samples without a source ({', '.join(Tag)}); rename it.",
        )
    for name in source.properties:
        if words := no_property(name) or impossible(name, source.properties[name].value):
            yield ("properties", name), words
    yield from ((("covariance", at), words) for at, words in _covariance_faults(source))


def no_property(name: str) -> str | None:
    """Return why a name is no property of a mixture, None where it is one."""
    if name not in REGISTRY:
        return f"found the property '{name}', which is no name of the registry; correct its spelling or remove it."
    if name not in PROPERTIES:
        return (
            f"found the property '{name}', which does not mix in proportion; expected a concentration, a "
            f"salinity or conservative_temperature; replace it."
        )
    return None


def gaps(
    source: Source, chosen: SourceSet, state: ReferenceState | None, *, doubtful_state: bool
) -> Iterator[str]:
    """Yield what a source does not give of the properties of a set it is part of.

    Parameters
    ----------
    source
        The source, with what could be converted.
    chosen
        The set.
    state
        Where published values are converted.
    doubtful_state
        Whether a reference state is written whose own faults are told already.

    """
    missing = [name for name in chosen.properties if name not in source.properties and name not in LISTED_AS]
    plain = [name for name in missing if not has_counterpart(source, name)]
    if plain:
        yield (
            f"found no {', '.join(plain)}; expected every property of the set '{chosen.name}'; add "
            f"{'them' if len(plain) > 1 else 'it'}, or take the source from the set."
        )
    if not doubtful_state:
        convertible = [
            name for name in missing if name not in plain and not _from_the_impossible(source, name)
        ]
        yield from dict.fromkeys(obstacle(source, name, state) or "" for name in convertible)


def _from_the_impossible(source: Source, name: str) -> bool:
    """Return whether what ``name`` would be made from is at fault itself, which is told already."""
    given = [one for one in MADE_FROM[name] if one in source.properties]
    return any(impossible(one, source.properties[one].value) for one in given)


def _covariance_faults(source: Source) -> Iterator[tuple[str, str]]:
    given = source.covariance
    if given is None:
        return
    names = given.properties
    strange = [name for name in names if name not in source.properties]
    if strange or len(set(names)) < len(names):
        yield (
            "properties",
            (
                f"found a covariance of {', '.join(names)}; expected each once, and all of them among its properties; "
                f"correct the list."
            ),
        )
        return
    sizes = {len(row) for row in given.matrix} | {len(given.matrix)}
    if sizes != {len(names)}:
        yield (
            "matrix",
            (
                f"found a covariance of {len(given.matrix)} rows of {_joined(len(row) for row in given.matrix)} "
                f"numbers; expected {len(names)} rows of {len(names)}, one for each of its properties; correct it."
            ),
        )
        return
    yield from (("matrix", words) for words in _matrix_faults(source, np.array(given.matrix), names))


def _matrix_faults(source: Source, matrix: np.ndarray, names: tuple[str, ...]) -> Iterator[str]:
    """Judge a covariance (n, n) of properties that the source gives."""
    stated = np.array([source.properties[name].uncertainty for name in names])
    off = [
        (name, entry, spread)
        for name, entry, spread in zip(names, np.diag(matrix), stated, strict=True)
        if entry <= 0 or abs(entry**0.5 / spread - 1) > _DIAGONAL
    ]
    for name, entry, spread in off:
        yield (
            f"found {entry:g} as variance of {name}, whose uncertainty is {spread:g}; expected {spread**2:.4g}, its "
            f"square; correct one of the two."
        )
    if off:
        return
    together = matrix / np.outer(stated, stated)
    one, other = np.unravel_index(np.argmax(abs(together - together.T)), matrix.shape)
    if abs(together[one, other] - together[other, one]) > _SYMMETRY:
        yield (
            f"found {matrix[one, other]:g} and {matrix[other, one]:g} as covariance of {names[one]} and {names[other]}"
            f"; expected a symmetric matrix; make them the same."
        )
    elif float(np.linalg.eigvalsh(together).min()) < _SMALLEST:
        yield (
            "found a covariance that is not positive definite: some combination of the properties would have no "
            "spread, or less than none; expected correlations that can hold together; lower those off the diagonal."
        )


def _joined(numbers: Iterator[int]) -> str:
    return " and ".join(str(number) for number in sorted(set(numbers)))
