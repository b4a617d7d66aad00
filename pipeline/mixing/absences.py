"""Properties that a source set counts on and a cruise never measured: told once, not sample by sample."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from pipeline.findings import Finding, Severity
from pipeline.mixing.domains import validity
from pipeline.usable import usable

if TYPE_CHECKING:
    import pyarrow as pa

    from pipeline.mixing.entries import Catalogue
    from pipeline.settings import Settings


def absent_properties(samples: pa.Table, catalogue: Catalogue, settings: Settings) -> tuple[Finding, ...]:
    """Return a finding for every property of a set that no sample in its domain has.

    Parameters
    ----------
    samples
        Table of registry columns, n_sample rows.
    catalogue
        The source waters and the sets.
    settings
        Which values may be used, and where the mixed layer ends.

    """
    findings = []
    for chosen in catalogue.set:
        inside, _ = validity(samples, chosen.valid, settings)
        for name in chosen.properties if inside.any() else ():
            if np.isnan(usable(samples, name, settings.use)[inside]).all():
                message = (
                    f"source set '{chosen.name}': none of the {inside.sum()} samples in its domain has a {name} that "
                    f"may be used; expected some; deliver it, or use a set without it."
                )
                findings.append(
                    Finding("absent-property", Severity.NOTE, message, variable=name, count=int(inside.sum()))
                )
    return tuple(findings)
