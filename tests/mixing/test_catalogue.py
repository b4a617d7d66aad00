from __future__ import annotations

from pathlib import Path

import pytest

from pipeline.mixing.catalogue import parse_catalogue, read_catalogue
from pipeline.mixing.entries import Catalogue
from pipeline.problems import CatalogueProblem

from .catalogues import NAME, TEXT, catalogue, changed

_NUMBER = "a number from -1000000 to 1000000, in the unit of the registry"
_POSITIVE = "a number above 0, from 1e-09 to 1000000, in the unit of the registry"
_HEAT = f"'uncertainty' of source 'NOR', conservative_temperature; expected {_POSITIVE}; correct it."

# Passages replaced, and the sentences that follow.
REFUSED: list[tuple[list[tuple[str, str]], list[str]]] = [
    (
        [("oxygen = { value = 290.0, uncertainty = 3.0 }\n", "")],
        [
            "line 8: source 'NOR': found no oxygen; expected every property of the set 'deep'; add it, or take the "
            "source from the set."
        ],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = -0.1 ")],
        [f"line 9: found -0.1 as {_HEAT}"],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = 0 ")],
        [f"line 9: found 0 as {_HEAT}"],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = 1e-320 ")],
        [f"line 9: found 1e-320 as {_HEAT}"],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = nan ")],
        [f"line 9: found nan as {_HEAT}"],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = inf ")],
        [f"line 9: found inf as {_HEAT}"],
    ),
    (
        [("uncertainty = 0.1 ", "uncertainty = 1e30 ")],
        [f"line 9: found 1e+30 as {_HEAT}"],
    ),
    (
        [("value = 35.0,", "value = -1e30,"), ("value = 2.2,", "value = nan,")],
        [
            f"line 10: found -1e+30 as 'value' of source 'NOR', preformed_salinity; expected {_NUMBER}; correct it.",
            f"line 22: found nan as 'value' of source 'SOU', phosphate; expected {_NUMBER}; correct it.",
        ],
    ),
    (
        [("value = 35.0,", 'value = "35.0",'), ("uncertainty = 0.03 ", "uncertainty = true ")],
        [
            f"line 10: found '35.0' as 'value' of source 'NOR', preformed_salinity; expected {_NUMBER}; correct it.",
            f"line 12: found True as 'uncertainty' of source 'NOR', phosphate; expected {_POSITIVE}; correct it.",
        ],
    ),
    (
        [(", uncertainty = 0.1 ", " ")],
        [
            f"line 9: found no 'uncertainty' in source 'NOR', conservative_temperature; expected {_POSITIVE}; add it."
        ],
    ),
    (
        [("oxygen = { value = 290.0, uncertainty = 3.0 }", "oxygen = 290.0")],
        [
            "line 11: found 290.0 as 'oxygen' of source 'NOR'; expected { value = ..., uncertainty = ... }; correct it."
        ],
    ),
    (
        [("title = ", "titel = ")],
        [
            "line 1: found no 'title' in [catalogue]; expected text; add it.",
            "line 2: found the unknown key 'titel' in [catalogue]; expected one of title, reference, reference_state; "
            "correct or remove it.",
        ],
    ),
    (
        [('name = "Northern water"', 'name = "Northern water"\ncolour = "blue"')],
        [
            "line 8: found the unknown key 'colour' in source 'NOR'; expected one of code, name, note, properties, "
            "covariance; correct or remove it."
        ],
    ),
    (
        [("pressure = ", "density = ")],
        [
            "line 31: found the unknown key 'density' in set 'deep', valid; expected one of pressure, depth, sigma0, "
            "sigma2, sigma4, latitude, longitude, region, months, mixed_layer; correct or remove it."
        ],
    ),
    (
        [("[[set]]", "[[sets]]"), ("[set.valid]\npressure = [1000.0, 6000.0]\n", "")],
        [
            "found no 'set' in the catalogue; expected at least one table [[set]]; add it.",
            "line 25: found the unknown key 'sets' in the catalogue; expected one of catalogue, source, set; correct "
            "or remove it.",
        ],
    ),
    (
        [("phosphate = { value = 1.0", "phosfate = { value = 1.0")],
        [
            "line 8: source 'NOR': found no phosphate; expected every property of the set 'deep'; add it, or take the "
            "source from the set.",
            "line 12: source 'NOR': found the property 'phosfate', which is no name of the registry; correct its "
            "spelling or remove it.",
        ],
    ),
    (
        [("nitrate = { value = 14.0", "ph_total = { value = 14.0"), (', "nitrate"]', "]")],
        [
            "line 13: source 'NOR': found the property 'ph_total', which does not mix in proportion; expected a "
            "concentration, a salinity or conservative_temperature; replace it."
        ],
    ),
    (
        [('code = "SOU"', 'code = "NOR"')],
        [
            "line 16: found a second source 'NOR'; expected every code once; rename one.",
        ],
    ),
    (
        [('code = "SOU"', "code = 5")],
        [
            "line 16: found 5 as 'code' of source 2; expected 1 to 12 of the characters A-Z a-z 0-9 _ -; correct it."
        ],
    ),
    (
        [('code = "NOR"', ""), ('code = "SOU"', "")],
        [
            "line 5: found no 'code' in source 1; expected 1 to 12 of the characters A-Z a-z 0-9 _ -; add it.",
            "line 15: found no 'code' in source 2; expected 1 to 12 of the characters A-Z a-z 0-9 _ -; add it.",
        ],
    ),
    (
        [('code = "SOU"', 'code = "Mixed"'), ('"SOU"]', '"Mixed"]')],
        [
            "line 16: source 'Mixed': found a code that is a tag for samples without a source (mixed, unexplained, "
            "undetermined, incomplete, outside); rename it."
        ],
    ),
    (
        [('code = "SOU"', 'code = "S O"')],
        [
            "line 16: found 'S O' as 'code' of source 'S O'; expected 1 to 12 of the characters A-Z a-z 0-9 _ -; "
            "correct it.",
            "line 27: set 'deep': found the unknown source 'SOU'; expected some of NOR, S O; correct it.",
        ],
    ),
    (
        [
            ("value = -0.5", "value = 2.0"),
            ("value = 34.7", "value = 35.0"),
            ("value = 250.0", "value = 290.0"),
            ("value = 2.2,", "value = 1.0,"),
            ("value = 32.0", "value = 14.0"),
        ],
        [
            "line 27: set 'deep': found the same value of every property in the sources 'NOR' and 'SOU'; expected "
            "sources that differ; add a property that tells them apart or remove one."
        ],
    ),
    (
        [('["NOR", "SOU"]', '["NOR", "SOU", "NOR"]')],
        ["line 27: set 'deep': found the source 'NOR' twice; expected it once; remove one."],
    ),
    (
        [('["NOR", "SOU"]', "[]")],
        [
            "line 27: found [] as 'sources' of set 'deep'; expected a list of 1 to 12 source codes; correct it."
        ],
    ),
    (
        [
            (
                '["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"]',
                '["oxygen"]',
            )
        ],
        [
            "line 27: set 'deep': found 3 unknowns (2 shares and respiration) for 2 equations (1 property and the "
            "sum of the shares); expected no more unknowns than equations; add properties or take sources away."
        ],
    ),
    (
        [('"oxygen", "phosphate", "nitrate"]', "]")],
        [
            "line 29: set 'deep': found respiration = 'non_negative' and no property that respiration changes; "
            "expected oxygen, phosphate, nitrate or dic among them; add one, or set respiration = 'none'."
        ],
    ),
    (
        [("[1000.0, 6000.0]", "[6000.0, 1000.0]")],
        [
            "line 31: set 'deep': found the empty range [6000, 1000] of pressure; expected [low, high]; swap the ends."
        ],
    ),
    (
        [("pressure = [1000.0, 6000.0]", "latitude = [-100, 10]")],
        [
            "line 31: set 'deep': found -100 as an end of the latitudes it is valid in; expected -90 to 90; correct it."
        ],
    ),
    (
        [("[1000.0, 6000.0]", "[1000.0]")],
        [
            "line 31: found [1000.0] as 'pressure' of set 'deep', valid; expected two numbers, [low, high]; correct it."
        ],
    ),
    (
        [('"non_negative"', '"sometimes"')],
        [
            "line 29: found 'sometimes' as 'respiration' of set 'deep'; expected \"none\", \"non_negative\" or "
            '"free"; correct it.'
        ],
    ),
    (
        [
            (
                'respiration = "non_negative"',
                'weights = "given"\ngiven_weights = { oxygen = 3.0, mass = 9.0, silicate = 1.0 }',
            )
        ],
        [
            "line 30: set 'deep': found given weights for silicate, not among its properties; remove them.",
            "line 30: set 'deep': found no given weight for conservative_temperature, preformed_salinity, phosphate, "
            "nitrate; expected one each; add them.",
        ],
    ),
    (
        [('respiration = "non_negative"', "given_weights = { oxygen = 3.0 }\nmass_weight = 5.0")],
        [
            "line 29: set 'deep': found given_weights with weights = 'uncertainty'; expected them only with weights = "
            "'given'; remove one of the two.",
            "line 30: set 'deep': found a mass_weight with mass = 'exact'; expected it only with mass = 'weighted'; "
            "remove one of the two.",
        ],
    ),
    (
        [("value = 250.0", "value = 290.0"), ('respiration = "non_negative"', 'weights = "variance"')],
        [
            "line 29: set 'deep': found the same oxygen in all sources, which weights = 'variance' cannot scale; "
            "expected values that differ; take it from the set, or set weights = 'uncertainty'."
        ],
    ),
    (
        [('["NOR", "SOU"]', '["NOR"]'), ('respiration = "non_negative"', 'mass = "weighted"')],
        [
            "line 29: set 'deep': found mass = 'weighted' for a single source, whose values have no spread to set its "
            "weight by; expected a mass_weight; add it, or set mass = 'exact'."
        ],
    ),
]


@pytest.mark.parametrize(("changes", "sentences"), REFUSED, ids=[str(i) for i in range(len(REFUSED))])
def test_every_fault_is_told_in_one_sentence_with_its_line(
    changes: list[tuple[str, str]], sentences: list[str]
) -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue(changed(*changes), NAME)
    told = str(refusal.value).splitlines()
    assert told == [f"{NAME}, {s}" if s.startswith("line") else f"{NAME}: {s}" for s in sentences]


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        (
            "a = = 1\n",
            "line 1: found text that is not TOML (Invalid value); expected a source catalogue; correct it.",
        ),
        (
            TEXT.replace('title = "Invented"', 'title = "one"\ntitle = "two"'),
            "line 3: found text that is not TOML (Cannot overwrite a value); expected a source catalogue; correct it.",
        ),
        (
            "EXPOCODE,STNNBR\n1,2\n",
            "line 1: found text that is not TOML (Expected '=' after a key in a key/value pair); expected a source "
            "catalogue; correct it.",
        ),
    ],
)
def test_text_that_is_not_toml(text: str, sentence: str) -> None:
    with pytest.raises(CatalogueProblem) as refusal:
        parse_catalogue(text, NAME)
    assert str(refusal.value) == f"{NAME}, {sentence}"


@pytest.mark.parametrize(
    "text", ["", "source = 3\nset = [1, 2]\ncatalogue = 'x'\n", "a = " + "[" * 5_000 + "]" * 5_000]
)
def test_anything_else_is_refused_and_never_a_fault_of_ours(text: str) -> None:
    with pytest.raises(CatalogueProblem, match=r"^sources\.toml"):
        parse_catalogue(text, NAME)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    missing, folder, binary, big = (
        tmp_path / n for n in ("missing.toml", "folder", "binary.toml", "big.toml")
    )
    folder.mkdir()
    binary.write_bytes(b"[catalogue]\ntitle = '\xff\xfe'\n")
    big.write_bytes(b"#" * 1_000_001)
    for path, words in (
        (missing, ": the source catalogue cannot be read (No such file or directory); name a file."),
        (folder, ": the source catalogue cannot be read (Is a directory); name a file."),
        (
            binary,
            ", line 2: found bytes that are not UTF-8 text; expected a source catalogue in TOML; save it as UTF-8.",
        ),
        (big, ": found more than 1000000 bytes; expected a source catalogue; name another file."),
    ):
        with pytest.raises(CatalogueProblem) as refusal:
            read_catalogue(path)
        assert str(refusal.value) == f"{path}{words}"


def test_the_file_is_read_as_written(tmp_path: Path) -> None:
    path = tmp_path / NAME
    path.write_text(TEXT, encoding="utf-8")
    read = read_catalogue(path)
    assert read.title == "Invented"
    assert read.sources["SOU"].properties["oxygen"].value == 250.0
    assert read.set[0].sources == ("NOR", "SOU")
    assert read.set[0].valid.pressure == (1000.0, 6000.0)
    assert read.set[0].mass == "exact"
    assert read.set[0].weights == "uncertainty"


def test_a_byte_order_mark_is_no_text(tmp_path: Path) -> None:
    path = tmp_path / NAME
    path.write_bytes(b"\xef\xbb\xbf" + TEXT.encode())
    assert read_catalogue(path).sha256 == catalogue().sha256


def test_of_a_long_list_the_entry_at_fault_is_quoted_and_once() -> None:
    nitrate = "nitrate = { value = 14.0, uncertainty = 0.4 }\n"
    names = ", ".join(f'"{name}"' for name in catalogue().source[0].properties)
    matrix = ", ".join("[" + ", ".join(["0.123456789"] * 4 + ["nan"]) + "]" for _ in range(5))
    with pytest.raises(CatalogueProblem) as refusal:
        catalogue((nitrate, f"{nitrate}[source.covariance]\nproperties = [{names}]\nmatrix = [{matrix}]\n"))
    assert str(refusal.value) == (
        f"{NAME}, line 16: found nan in the 'matrix' of source 'NOR', covariance; expected as many rows of as many "
        "numbers, each a number from -1000000 to 1000000; correct it."
    )


def test_the_hash_is_of_the_content_and_not_of_its_layout() -> None:
    one = catalogue()
    laid_out = catalogue(("value = 2.0,", "value   =  2,"), end="# a remark\n")
    assert laid_out.sha256 == one.sha256
    assert catalogue(("value = 2.0,", "value = 2.01,")).sha256 != one.sha256
    assert len(one.sha256) == 64


def test_it_travels_between_processes() -> None:
    one = catalogue()
    assert Catalogue.model_validate(one.model_dump(mode="json")) == one


def test_it_cannot_be_changed() -> None:
    with pytest.raises(ValueError, match="frozen"):
        catalogue().set[0].name = "other"  # type: ignore[misc]


def test_the_demonstration_catalogue_is_usable() -> None:
    read = read_catalogue(Path(__file__).parents[2] / "fixtures" / "sources.toml")
    assert len(read.source) == 5
