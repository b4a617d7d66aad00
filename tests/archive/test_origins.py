from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from pipeline.archive import open_archive, vault
from pipeline.archive.origins import compare_origins
from pipeline.settings import Settings

from .invented import provenance

if TYPE_CHECKING:
    from pathlib import Path


def test_what_is_the_same_is_no_change(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    same = compare_origins(store, provenance(), replace(provenance(), revision=7))
    assert not same.delivery_changed
    assert not same.processing_changed
    assert same.settings == {}


def test_files_are_told_apart_by_their_content(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    before = provenance()
    bottle, casts = before.deliveries
    after = replace(before, deliveries=(replace(bottle, sha256="9" * 64), replace(casts, name="b_ct1.zip")))
    changed = compare_origins(store, before, after)
    assert [file.sha256 for file in changed.files_gone] == [bottle.sha256]
    assert [file.sha256 for file in changed.files_added] == ["9" * 64]
    assert changed.files_renamed == (("a_ct1.zip", "b_ct1.zip"),)
    assert changed.delivery_changed
    assert not changed.processing_changed
    described = replace(before, deliveries=(replace(bottle, described_by="8" * 64), casts))
    assert compare_origins(store, before, described).delivery_changed


def test_settings_are_compared_value_by_value_where_the_archive_has_both(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    one = Settings()
    other = Settings.model_validate({"mixing": {"tag_share": 0.7}, "use": {"water_flags": [2]}})
    before = replace(provenance(), settings_sha256=vault.keep(store, one.text))
    after = replace(provenance(), settings_sha256=other.sha256)
    lost = compare_origins(store, before, after)
    assert lost.settings_changed
    assert lost.settings is None
    vault.keep(store, other.text)
    found = compare_origins(store, before, after)
    assert found.settings == {"mixing.tag_share": (0.5, 0.7), "use.water_flags": ([2, 6], [2])}
    assert found.processing_changed


def test_sources_and_versions(tmp_path: Path) -> None:
    store = open_archive(tmp_path, create=True)
    before = provenance()
    changed = compare_origins(store, before, replace(before, catalogue_sha256=None, catalogue_title=""))
    assert changed.sources_changed
    assert changed.sources == ("Sources of an invented ocean", "")
    assert compare_origins(store, before, replace(before, pipeline_version="99")).version_changed
