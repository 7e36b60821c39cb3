"""An absorber: one junction or several over each other, and how it sits in its module."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

from yieldsim.device import junction as junctions_module
from yieldsim.device import optics
from yieldsim.device.junction import Junction
from yieldsim.device.response import Response

#: Field -> lowest and highest sane value.
LIMITS: dict[str, tuple[float, float]] = {
    "bifaciality": (0.0, 1.0),
    "incidence_modifier": (0.05, 0.5),
    "area_fraction": (0.1, 1.0),
    "coupling": (0.0, 1.0),
}
HEAT_LOSS_LIMITS = ((5.0, 100.0), (0.0, 30.0))


@dataclass(frozen=True, slots=True, eq=False)
class Absorber:
    """What is compared: a stack of junctions in a module.

    Parameters
    ----------
    name : str, as the study calls it
    junctions : tuple of Junction, the one that meets the light first comes first
    terminals : int, 2 = in series; 4 = each junction at its own power point; means nothing for one junction
    bifaciality : float [1], current from rear light over current from the same light in front, 0-1
    incidence_modifier : float [1] or None, a_r of Martin & Ruiz (2001): angular loss of the front glass, 0.16 for plain
        glass, less for coated or structured glass; None = no loss beyond normal incidence
    area_fraction : float [1], light-collecting area over module area; powers and efficiencies of this package are per
        collecting area unless they say otherwise
    coupling : float [1], luminescent coupling: share of the light each junction emits that the next one below
        collects; see `series`
    heat_loss : (float [W m-2 K-1], float [W m-3 s K-1]), u0 and u1 of `thermal.faiman`

    Raises
    ------
    ValueError
        For a value outside `LIMITS`, no junction, or gaps that do not fall from top to bottom.

    References
    ----------
    Martin, N., Ruiz, J. M. (2001), Sol. Energy Mater. Sol. Cells 70, 25.
    """

    name: str
    junctions: tuple[Junction, ...]
    terminals: int = 2
    bifaciality: float = 0.0
    incidence_modifier: float | None = 0.16
    area_fraction: float = 1.0
    heat_loss: tuple[float, float] = (25.0, 6.84)
    coupling: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what cannot be."""
        faults = [
            f"{name} is {value:g}; it must lie in {low:g} to {high:g}"
            for name, (low, high) in LIMITS.items()
            if (value := getattr(self, name)) is not None and not low <= value <= high
        ]
        faults.extend(
            f"heat loss u{i} is {value:g}; it must lie in {low:g} to {high:g}"
            for i, (value, (low, high)) in enumerate(zip(self.heat_loss, HEAT_LOSS_LIMITS, strict=True))
            if not low <= value <= high
        )
        if not self.name:
            faults.append("an absorber needs a name")
        if not self.junctions:
            faults.append("an absorber needs a junction")
        if self.terminals not in (2, 4):
            faults.append(f"{self.terminals} terminals; it must be 2 or 4")
        gaps = self.gaps_ev
        if any(upper < lower for upper, lower in pairwise(gaps)):
            faults.append(f"gaps {gaps} eV; they must fall from top to bottom")
        if faults:
            raise ValueError("; ".join(faults))

    @property
    def gaps_ev(self) -> tuple[float, ...]:
        """Gap of each junction [eV], top first."""
        return tuple(junction.gap_ev for junction in self.junctions)


def responses_at(absorber: Absorber, temperature: float) -> tuple[Response, ...]:
    """Return the response of each junction where it sits in the stack, at a cell temperature [K]."""
    return optics.in_stack(absorber.junctions, temperature)


def moved_to_gap(absorber: Absorber, gap_ev: float) -> Absorber:
    """Return an absorber of one junction with its gap [eV] moved, all else kept.

    Raises
    ------
    ValueError
        For a stack, or a gap out of reach.
    """
    if len(absorber.junctions) != 1:
        raise ValueError(f"{absorber.name} has {len(absorber.junctions)} junctions; name the gap of each instead")
    return replace(absorber, junctions=(junctions_module.moved_to_gap(absorber.junctions[0], gap_ev),))


def gap_label(absorber: Absorber) -> str:
    """Return the gaps as people write them, top first: ``1.68/1.12``."""
    return "/".join(f"{gap:.12g}" for gap in absorber.gaps_ev)
