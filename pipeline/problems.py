"""Every refusal that a user can meet, as one small tree.

    Problem                    something the user can mend; its text is the sentence to show
      DeliveryProblem          a delivered file is refused whole (reason: a short name, for tables)
      CatalogueProblem         the source catalogue cannot be used
      SettingsProblem          the settings cannot be used
      ArchiveProblem           the archive cannot be read or written as it stands
        ArchiveBusy            another run holds the archive
      UsageProblem             the command was called wrongly

    BrokenPromise              a fault of ours: a promise of the pipeline does not hold

A message says what was found, where, what was expected and what to do, in one sentence.
"""

from __future__ import annotations


class Problem(Exception):  # noqa: N818 - the user's word; an error is what the program makes
    """Something that the user can mend. ``str()`` of it is the sentence to show."""


class DeliveryProblem(Problem):
    """A delivered file is refused whole.

    Parameters
    ----------
    reason
        Short name of the reason, kept in tables (``empty-file``, ``no-expocode``, ...).
    sentence
        What was found, where, what was expected, and what to do.
    line
        Line of the delivered file, counted from 1, where there is one to point at.

    """

    def __init__(self, reason: str, sentence: str, line: int | None = None) -> None:
        super().__init__(sentence)
        self.reason = reason
        self.line = line

    def __reduce__(self) -> tuple[type[DeliveryProblem], tuple[str, str, int | None]]:
        """Keep the reason when the problem travels between processes."""
        return type(self), (self.reason, str(self), self.line)


class CatalogueProblem(Problem):
    """The source catalogue cannot be used."""


class SettingsProblem(Problem):
    """The settings cannot be used."""


class ArchiveProblem(Problem):
    """The archive cannot be read or written as it stands."""


class ArchiveBusy(ArchiveProblem):
    """Another run holds the archive."""


class UsageProblem(Problem):
    """The command was called wrongly."""


class BrokenPromise(RuntimeError):  # noqa: N818 - it names what it is
    """A promise of the pipeline does not hold: a fault of ours, never of the user's."""
