"""The ``cruise.toml`` beside delivered files: which of them it describes, and which edition it says stands."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading import CRUISE_FILE, CruiseFile, read_cruise_file

if TYPE_CHECKING:
    from flows.places import Place
    from pipeline.reading import Description


@dataclass(frozen=True, slots=True)
class Beside:
    """What is said of one delivered file by the ``cruise.toml`` in its folder; nothing where there is none."""

    text: bytes = b""  # the whole cruise.toml, where it says anything of this file
    description: Description | None = None
    stands: bool = False  # whether this file stands where another holds the same samples
    fault: str = ""  # why the cruise.toml cannot be used, and so the file neither

    @property
    def sha256(self) -> str:
        """Hash of the ``cruise.toml``, "" where it says nothing of the file."""
        return hashlib.sha256(self.text).hexdigest() if self.text else ""


NOTHING = Beside()


class Folder:
    """The ``cruise.toml`` of one folder, if it has one: read once for all files beside it."""

    def __init__(self, folder: Place, shown: str) -> None:
        self._text = b""
        self._fault = ""
        self._said: CruiseFile | None = None
        path = folder / CRUISE_FILE
        if not path.is_file():
            return
        try:
            self._text = path.read_bytes()
            self._said = read_cruise_file(shown, self._text)
        except DeliveryProblem as problem:
            self._fault = str(problem)
        except OSError as error:
            self._fault = f"{shown}: the file cannot be read ({error.strerror}); see to it that it can."

    def says(self, name: str) -> Beside:
        """Return what is said of the file ``name`` of this folder."""
        if self._fault:
            return Beside(fault=self._fault)
        if self._said is None:
            return NOTHING
        description, stands = self._said.of(name), name in self._said.stands
        if description is None and not stands:
            return NOTHING
        return Beside(self._text, description, stands)
