"""How the profiles of a CF file lie in its arrays (CF chapter 9 and appendix H), and any array laid out as rows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from pipeline.reading.netcdf_bytes import StoredFile, StoredVariable

    Dimensions = tuple[str, ...]

_NOT_PROFILES = {
    "timeseries": "time series", "trajectory": "trajectories", "timeseriesprofile": "time series of profiles",
    "trajectoryprofile": "profiles along trajectories",
}  # fmt: skip
_WANTED = (
    'expected profiles: CF\'s featureType "profile", a vertical coordinate along one dimension, and no more than one'
    " dimension beside it; ask for the casts or bottles as profiles, or as exchange files."
)


@dataclass(frozen=True, slots=True)
class Layout:
    """Rows of a file: ``dimensions`` spanned in this order, or one, with a profile named for each of its rows."""

    dimensions: Dimensions
    shape: tuple[int, ...]
    profile_dimension: str | None = None  # of ragged arrays: where what a profile has lies
    profile_of: NDArray[np.int64] | None = None  # (n_row,) of ragged arrays: -1 where a row has none

    @property
    def n_row(self) -> int:
        """How many rows the arrays have room for, whether used or not."""
        return int(np.prod(self.shape, dtype=np.int64))

    def spanned(self, variable: StoredVariable) -> bool:
        """Return whether a variable has a value for every row of its own."""
        return set(self.dimensions) <= set(variable.dimensions)

    def rows(self, dimensions: Dimensions, values: NDArray[Any]) -> NDArray[Any] | None:
        """Return an array as one value a row, (n_row,); None where it does not lie along the rows.

        Dimensions of one element do not count: what lies along them is of every row.
        """
        dimensions, values = squeezed(dimensions, values, self.dimensions)
        if self.profile_of is not None and dimensions == (self.profile_dimension,):
            return _taken(values, self.profile_of)
        if not set(dimensions) <= set(self.dimensions):
            return None
        order = [dimensions.index(name) for name in self.dimensions if name in dimensions]
        shape = [
            size if name in dimensions else 1 for name, size in zip(self.dimensions, self.shape, strict=True)
        ]
        return np.broadcast_to(values.transpose(order).reshape(shape), self.shape).reshape(-1)


def squeezed(
    dimensions: Dimensions, values: NDArray[Any], keep: Sequence[str] = ()
) -> tuple[Dimensions, NDArray[Any]]:
    """Return an array without its dimensions of one element, other than those to keep."""
    kept = [i for i, name in enumerate(dimensions) if values.shape[i] != 1 or name in keep]
    return tuple(dimensions[i] for i in kept), values.reshape([values.shape[i] for i in kept])


def _taken(values: NDArray[Any], profile_of: NDArray[np.int64]) -> NDArray[Any]:
    """Return the value of each row's profile; nothing where it has none."""
    none = "" if values.dtype.kind == "O" else np.datetime64("NaT") if values.dtype.kind == "M" else np.nan
    known = (profile_of >= 0) & (profile_of < len(values))
    if not len(values):
        return np.full(len(profile_of), none, dtype=values.dtype)
    return np.where(known, values[np.where(known, profile_of, 0)], none).astype(values.dtype)


def refuse_other_features(name: str, file: StoredFile) -> None:
    """Refuse a file that says itself that it holds no profiles."""
    feature = file.text("featureType") or file.text("CF:featureType")
    if what := _NOT_PROFILES.get(feature.lower()):
        raise no_profiles(name, f"{what} (featureType is '{feature}')")


def no_profiles(name: str, found: str) -> DeliveryProblem:
    """Return the refusal of a file that is no file of profiles."""
    return DeliveryProblem("no-profiles", f"{name}: found {found}; {_WANTED}")


def layout_of(
    name: str, file: StoredFile, vertical: StoredVariable, measured: Mapping[str, StoredVariable]
) -> Layout:
    """Return how the profiles of a file lie.

    Parameters
    ----------
    name
        The file, for sentences.
    file
        Its dimensions and variables.
    vertical
        The pressure or depth.
    measured
        The other variables that are known for quantities of water, by name.

    Raises
    ------
    DeliveryProblem
        Where the arrays are not those of profiles.

    """
    along, _ = squeezed(vertical.dimensions, vertical.values)
    if len(along) == 1 and (ragged := _ragged(name, file, along[0])):
        return ragged
    spans = [squeezed(v.dimensions, v.values)[0] for v in measured.values()]
    widest = max([along, *spans], key=len)
    if len(widest) > 2:
        raise no_profiles(name, f"a gridded product ({', '.join(widest)})")
    if not along and widest:
        raise no_profiles(name, f"values along {' and '.join(widest)} at one level ({vertical.name})")
    if not along:  # one level
        along = tuple(d for d in vertical.dimensions[-1:])
        return Layout(along, tuple(1 for _ in along))
    if not set(along) <= set(widest):
        raise no_profiles(
            name, f"{vertical.name} along {', '.join(along)}, but values along {', '.join(widest)}"
        )
    dimensions = _profiles_first(widest, along)
    return Layout(dimensions, tuple(file.dimensions[d] for d in dimensions))


def _profiles_first(widest: Dimensions, along: Dimensions) -> Dimensions:
    """Return the two dimensions with that of the profiles first; CF has it so, and orthogonal arrays tell."""
    return (*(d for d in widest if d not in along), *along) if len(along) == 1 else widest


def _ragged(name: str, file: StoredFile, along: str) -> Layout | None:
    """Return the layout of contiguous or indexed ragged arrays, None where the file has none along this dimension."""
    n_row = file.dimensions[along]
    for variable in file.variables.values():
        if variable.text("sample_dimension") == along and len(variable.dimensions) == 1:
            counts = _whole(name, variable)
            if (counts < 0).any() or (counts > n_row).any() or counts.sum() > n_row:
                raise DeliveryProblem(
                    "broken-netcdf",
                    f"{name}: the profiles of the ragged arrays have {int(counts.sum())} elements by"
                    f" {variable.name}, but {along} has {n_row}; expected no more; ask for the file to be sent again.",
                )
            profile_of = np.full(n_row, -1, dtype=np.int64)
            profile_of[: counts.sum()] = np.repeat(np.arange(len(counts)), counts)
            return Layout((along,), (n_row,), variable.dimensions[0], profile_of)
        of = variable.text("instance_dimension")
        if of and variable.dimensions == (along,):
            profile_of = _whole(name, variable, missing=-1)
            outside = (profile_of < 0) | (profile_of >= file.dimensions.get(of, 0))
            return Layout((along,), (n_row,), of, np.where(outside, -1, profile_of))
    return None


def tells_layout(variable: StoredVariable) -> bool:
    """Return whether a variable says how profiles lie, and nothing else."""
    return bool(variable.text("sample_dimension") or variable.text("instance_dimension"))


def _whole(name: str, variable: StoredVariable, missing: int = 0) -> NDArray[np.int64]:
    """Return a variable of counts or indices."""
    values = variable.values
    if values.dtype.kind not in "iu":
        raise DeliveryProblem(
            "broken-netcdf",
            f"{name}: {variable.name} tells how the profiles lie and holds no whole numbers; expected a count or an"
            " index; ask for the file to be sent again.",
        )
    whole = np.asarray(values, dtype=np.int64)
    fill = variable.attributes.get("_FillValue")
    if fill is not None and np.size(fill) == 1 and np.ravel(fill)[0] == np.ravel(fill)[0]:
        whole = np.where(values == np.ravel(fill)[0], missing, whole)
    return whole
