"""Looking up the published form that the settings name, or saying which there are."""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeVar

from pipeline.problems import SettingsProblem

if TYPE_CHECKING:
    from collections.abc import Mapping
    from enum import StrEnum

    Name = TypeVar("Name", bound=StrEnum)
    Form = TypeVar("Form")


def chosen(forms: Mapping[Name, Form], setting: str, name: str) -> Form:
    """Return the form called ``name``.

    Raises
    ------
    SettingsProblem
        With the names that exist, where ``setting`` names another.

    """
    for known, form in forms.items():
        if known == name:
            return form
    raise SettingsProblem(
        f"{setting}: found '{name}', expected one of {', '.join(forms)}; correct the settings."
    )
