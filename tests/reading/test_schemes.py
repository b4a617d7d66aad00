"""Flags of other schemes as WHP flags: what is good in one, and nothing else, is good in the other."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.reading.schemes import FLAGS, WHP_MEANINGS, Scheme, mapping_words, to_whp
from pipeline.settings import Settings
from pipeline.variables import FlagScheme

NOTHING = np.nan
GOOD = {
    FlagScheme.WATER: Settings().use.water_flags,
    FlagScheme.CTD: Settings().use.ctd_flags,
    FlagScheme.BOTTLE: (2,),
}


@pytest.mark.parametrize(
    ("scheme", "table", "delivered", "whp"),
    [
        (Scheme.IODE, FlagScheme.WATER, [1, 2, 3, 4, 9], [2, NOTHING, 3, 4, 9]),
        (Scheme.QARTOD, FlagScheme.CTD, [1, 2, 3, 4, 9], [2, NOTHING, 3, 4, 9]),
        (Scheme.ARGO, FlagScheme.WATER, [0, 1, 2, 3, 4, 5, 8, 9], [NOTHING, 2, 2, 3, 4, 3, 3, 9]),
        (Scheme.ARGO, FlagScheme.CTD, [0, 1, 2, 3, 4, 5, 8, 9], [NOTHING, 2, 2, 3, 4, 3, 6, 9]),
        (Scheme.WHP, FlagScheme.WATER, [0, 1, 2, 65], [0, 1, 2, 65]),
    ],
)
def test_what_each_flag_becomes(
    scheme: Scheme, table: FlagScheme, delivered: list[float], whp: list[float]
) -> None:
    mapped = to_whp(scheme, np.array(delivered, dtype=float), table)
    np.testing.assert_array_equal(mapped.whp, whp)
    assert not len(mapped.odd)


def test_what_the_scheme_does_not_have_is_told_and_is_not_good() -> None:
    flags = np.array([1.0, 0.0, 7.0, np.nan, np.nan])
    mapped = to_whp(Scheme.IODE, flags, FlagScheme.WATER, unreadable=np.array([4]))
    assert mapped.odd.tolist() == [1, 2, 4]
    np.testing.assert_array_equal(mapped.whp, [2, 3, 3, np.nan, 3])


@pytest.mark.parametrize("scheme", [scheme for scheme in Scheme if scheme is not Scheme.WHP])
@pytest.mark.parametrize("table", list(FlagScheme))
def test_only_what_is_called_good_is_good(scheme: Scheme, table: FlagScheme) -> None:
    good = {
        number
        for number, flag in FLAGS[scheme].items()
        if "good" in flag.meaning or ("interpolated" in flag.meaning and table is FlagScheme.CTD)
    }
    assert good == {number for number, flag in FLAGS[scheme].items() if flag.whp(table) in GOOD[table]}
    assert all(flag.whp(table) in {None, *WHP_MEANINGS[table]} for flag in FLAGS[scheme].values())


def test_the_words_for_the_metadata() -> None:
    assert mapping_words(Scheme.IODE, FlagScheme.WATER) == (
        "IODE flags as WHP water flags: 1 as 2, 2 as no flag, 3 as 3, 4 as 4, 9 as 9"
    )
