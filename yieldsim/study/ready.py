"""What a fresh installation compiles, in two parts that take about as long: side by side before the first site.

Each part calls the compiled functions for one hour. What is compiled lies in a cache on disk, where the other process
and the next run find it. Imports are late, so that a process can be sent here before its parent has imported much.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from yieldsim.device.stack import Absorber


def light() -> None:
    """Have what splits measured light onto the bands."""
    import numpy as np

    from yieldsim.sky import closing, column

    none, one = np.zeros(1), np.ones(1)
    closing.close(
        column.reference_air(), one, none, 100 * one, np.zeros(1, dtype=bool),
        haze_hourly=False, constants=column.bare_optics(),
    )  # fmt: skip


def power(absorbers: Sequence[Absorber], _loader: object) -> None:
    """Have what gives absorbers their power points, what solves haze, and the column by itself.

    Parameters
    ----------
    absorbers : of the study
    _loader : gives a site's weather; to send it here is to import all it needs, while the other part compiles
    """
    import numpy as np

    from yieldsim.device.bank import Bank
    from yieldsim.sky import closing, column

    Bank.of(absorbers).standard()
    air, optics = column.reference_air(), column.bare_optics()
    closing.beam_haze(air, np.ones(1), np.full(1, 800.0), optics)
    column.transmit(air, np.zeros(1), optics)
