"""Reading the source catalogue: a usable one, or everything that is wrong with it at once."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pydantic import ValidationError

from pipeline.mixing.conversion import converted
from pipeline.mixing.entries import CatalogueFile
from pipeline.mixing.faults import entry_faults
from pipeline.mixing.form import form_faults, refusal
from pipeline.mixing.toml_files import parsed, text_of

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.mixing.entries import Catalogue

_WHAT = "a source catalogue"


def read_catalogue(path: Path) -> Catalogue:
    """Read a source catalogue.

    Raises
    ------
    CatalogueProblem
        With one sentence, on a line of its own, for everything that is wrong, in the order of the file.

    """
    return parse_catalogue(text_of(path, _WHAT), str(path))


def parse_catalogue(text: str, name: str) -> Catalogue:
    """Make a catalogue of the text of the file ``name``. Raises as ``read_catalogue`` does.

    Values of the published practice are made conservative here, so that all that follows sees one kind.
    """
    written = parsed(text, name, _WHAT)
    try:
        file = CatalogueFile.model_validate(written)
    except ValidationError as error:
        file = None
        faults = form_faults(error, written, CatalogueFile, "the catalogue")
    else:
        faults = []
    faults += entry_faults(written)
    if file is None or faults:
        raise refusal(name, text, faults)
    return converted(file)
