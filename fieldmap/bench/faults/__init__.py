"""Faults of a bench, to be put into simulated campaigns: kinds, sizes, and who could tell.

Each kind has five sizes, from harmless to gross, and says what could reveal it. A fault is put
into the readings as a table would have them, and the flux is made of the samples again.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING, Final

from fieldmap.bench.faults.flux import FLUX_FAULTS
from fieldmap.bench.faults.kind import SEVERITIES, FaultKind
from fieldmap.bench.faults.mixups import MIXUPS
from fieldmap.bench.faults.physics import PHYSICAL_FAULTS
from fieldmap.bench.faults.positions import POSITION_FAULTS
from fieldmap.bench.faults.references import REFERENCE_FAULTS
from fieldmap.bench.faults.rows import ROW_FAULTS
from fieldmap.bench.faults.setting import Faulty, Setting
from fieldmap.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np

__all__ = ["FAULTS", "SEVERITIES", "FaultKind", "Faulty", "Setting", "inject"]

FAULTS: Final[Mapping[str, FaultKind]] = MappingProxyType(
    {
        kind.key: kind
        for kind in (
            *POSITION_FAULTS,
            *ROW_FAULTS,
            *FLUX_FAULTS,
            *PHYSICAL_FAULTS,
            *MIXUPS,
            *REFERENCE_FAULTS,
        )
    }
)
"""All kinds of fault by their keys."""


def inject(setting: Setting, key: str, severity: int, rng: np.random.Generator) -> Faulty | None:
    """Put one fault into a campaign.

    Parameters
    ----------
    setting : Setting
        The campaign without it, the field it measured, and its noise.
    key : str
        One of `FAULTS`.
    severity : int
        1, mildest, to 5, gross.
    rng : numpy.random.Generator
        Chooses the pass, the instant and the sign.

    Returns
    -------
    Faulty or None
        None where the campaign has no place for it: a reference misread where there is none.

    Raises
    ------
    InputError
        No such kind or severity; or what the reader of tables says of the faulty table.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.bench.bench_errors import Noise
    >>> from fieldmap.bench.sources import Uniform
    >>> from fieldmap.readings import Axis, Campaign, Magnet, Wire, make_pass
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> one = make_pass([0.0, 0.1, 0.2, 0.3], [0.0, 0.1, 0.2, 0.3], rate=1.0, probe=wire)
    >>> campaign = Campaign("trial", Magnet("other", "B", 0.05), Axis("z", (0, 0.3), (0.1, 0.2)),
    ...     passes=(one,))
    >>> setting = Setting(campaign, lambda _: Uniform(1.0), {"pass": Noise(1e-7, 1e-8)})
    >>> inject(setting, "polarity", 5, np.random.default_rng(1)).campaign.passes[0].flux
    array([ 0. , -0.1, -0.2, -0.3])
    """
    if key not in FAULTS:
        raise InputError("argument 'key'", repr(key), f"one of {', '.join(FAULTS)}")
    if severity not in SEVERITIES:
        raise InputError("argument 'severity'", repr(severity), "a whole number from 1 to 5")
    kind = FAULTS[key]
    return kind.put(setting, kind.size(severity), rng)
