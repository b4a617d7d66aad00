"""Tables and sentences on how sure the shares are, and on what respiration changed."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from pipeline.archive import open_archive, read_contents
from pipeline.reporting import gather, telling
from pipeline.reporting.certainty import by_property, by_source
from pipeline.reporting.visits import sections_of, visits
from pipeline.settings import UseSettings
from pipeline.tables import with_columns
from tests.reporting.invented import EXPOCODE

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.reporting import Gathered


@pytest.fixture(scope="module")
def cruise(archive: Path) -> Gathered:
    store = open_archive(archive)
    return gather(store, read_contents(store).cruises[EXPOCODE], UseSettings())


@pytest.fixture(scope="module")
def unsure(cruise: Gathered) -> Gathered:
    """Return the cruise with five samples in which it is a toss-up which source leads."""
    probability = cruise.samples.column("leading_probability").to_numpy(zero_copy_only=False).copy()
    solved = np.flatnonzero(np.isfinite(probability))[:5]
    probability[:] = np.where(np.isfinite(probability), 1.0, np.nan)
    probability[solved] = 0.55
    return replace(cruise, samples=with_columns(cruise.samples, {"leading_probability": probability}))


def test_residuals_are_summed_up_by_property(cruise: Gathered) -> None:
    frame = pd.DataFrame(cruise.samples.to_pandas())
    rows = {row.words: row for row in by_property(cruise)}
    assert len(rows) == 6
    known = frame["residual_silicate"].dropna()
    low, middle, high = np.percentile(known, (16, 50, 84))
    made = rows["Silicic acid"]
    assert (made.count, made.unit) == (len(known), "µmol kg⁻¹")
    assert (made.median, made.spread) == pytest.approx((middle, (high - low) / 2))
    assert abs(made.farthest) == known.abs().max()


def test_samples_whose_leader_is_uncertain_are_counted_and_named(cruise: Gathered, unsure: Gathered) -> None:
    said = " ".join(telling.of_waters(unsure))
    assert "In 5 of them it is uncertain which source leads" in said
    pairs = telling.confused(unsure)
    assert sum(count for _, count in pairs) == 5
    frame = pd.DataFrame(cruise.mixtures.to_pandas())
    first = frame[frame["line"] == frame["line"].iloc[0]].nlargest(2, "share")["source"]
    assert set(first) in [set(pair) for pair, _ in pairs]
    assert sum(row.leads - row.leads_surely for row in by_source(unsure)) == 5
    assert any(words.startswith("Where the leader is uncertain") for words in telling.of_certainty(unsure))


def test_what_respiration_changed_most_is_told_with_its_place(cruise: Gathered) -> None:
    frame = pd.DataFrame(cruise.samples.to_pandas())
    changed = frame["nitrate_from_respiration"]
    row = int(np.nanargmax(changed.abs().to_numpy()))
    (said,) = (
        words for words in telling.of_split(cruise, visits(cruise.samples)) if words.startswith("Nitrate")
    )
    assert f"at station {frame['station'][row]}, {frame['pressure'][row]:g} dbar" in said
    assert f"where the sources brought {frame['nitrate_from_sources'][row]:.4g}." in said


def test_a_source_that_stays_below_a_half_is_told_so(cruise: Gathered) -> None:
    found = visits(cruise.samples)
    said = telling.of_sources(cruise, found, sections_of(found))
    assert len(said) == len(cruise.sources)
    (bottom,) = (words for words in said if words.startswith("BOT"))
    assert "it stays below 0.5 everywhere" in bottom
    (central,) = (words for words in said if words.startswith("CEN"))
    assert "it is above 0.5 somewhere in every cast" in central
