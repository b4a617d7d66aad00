"""The ``cruise.toml`` beside delivered files: which of them it describes, and which edition it says stands."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.reading import CRUISE_FILE, CruiseFile, read_cruise_file

if TYPE_CHECKING:
    from collections.abc import Collection, Iterable, Iterator

    from flows.places import Place
    from pipeline.reading import Description


_MOST_NAMED = 8
# Refusals of a file that a description would have helped.
_HELPED = frozenset({"not-described", "not-a-cruise-file"})


@dataclass(frozen=True, slots=True)
class Beside:
    """What is said of one delivered file by the ``cruise.toml`` in its folder; nothing where there is none."""

    text: bytes = b""  # the whole cruise.toml, where it says anything of this file
    description: Description | None = None
    stands: bool = False  # whether this file stands where another holds the same samples
    fault: str = ""  # why the cruise.toml cannot be used, and so the file neither
    others: tuple[str, ...] = ()  # names and patterns that it describes, where this file is none of them
    absent: tuple[str, ...] = ()  # names that it says stand and that no file has
    notes: tuple[str, ...] = ()  # what it says of files that are not there

    @property
    def sha256(self) -> str:
        """Hash of the ``cruise.toml``, "" where it says nothing of the file."""
        return hashlib.sha256(self.text).hexdigest() if self.text else ""

    def explained(self, problem: DeliveryProblem) -> str:
        """Return the sentence of a refusal, with what else the ``cruise.toml`` describes where it could have helped."""
        if problem.reason not in _HELPED or not self.others:
            return str(problem)
        return f"{problem} The {CRUISE_FILE} beside it describes {_quoted(self.others)} and not this file."


NOTHING = Beside()


class Folder:
    """The ``cruise.toml`` of one folder, if it has one: read once for all files beside it.

    Parameters
    ----------
    folder
        Where it is.
    shown
        What to call it in sentences.
    names
        The files of the folder.

    """

    def __init__(self, folder: Place, shown: str, names: Collection[str]) -> None:
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
        if self._said is not None:
            self._absent = tuple(name for name in self._said.stands if name not in names)
            self._notes = tuple(_notes(self._said, shown, names, self._absent))

    def says(self, name: str) -> Beside:
        """Return what is said of the file ``name`` of this folder."""
        if self._fault:
            return Beside(fault=self._fault)
        if self._said is None:
            return NOTHING
        description, stands = self._said.of(name), name in self._said.stands
        others = () if description else tuple(one.files for one in self._said.descriptions)
        text = self._text if description is not None or stands else b""
        return Beside(text, description, stands, others=others, absent=self._absent, notes=self._notes)


def _notes(said: CruiseFile, shown: str, names: Collection[str], absent: Iterable[str]) -> Iterator[str]:
    """Yield a sentence for everything that is said of a file that is not there."""
    for name in absent:
        place = f"{shown}, line {said.stands_line}" if said.stands_line else shown
        yield f"{place}: says that '{name}' stands, and no file beside it is called so; correct the name, or remove it."
    for one in said.descriptions:
        if not any(one.fits(name) for name in names):
            yield (
                f"{one.place(one.files_line)}: describes '{one.files}', and no file beside it is called so; correct the"
                " name, or remove what is said of it."
            )


def _quoted(names: tuple[str, ...]) -> str:
    return ", ".join(f"'{name}'" for name in names[:_MOST_NAMED]) + (
        " and others" if len(names) > _MOST_NAMED else ""
    )
