"""What a study may say of its draws: how many, how far each input scatters, what sites share."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Annotated, Any

from pydantic import Field, Tag, create_model

from yieldsim.config.fields import Name, Number, Section, Whole, by
from yieldsim.study.chance_inputs import BY_NAME, INPUTS, OF_ABSORBER, OF_JUNCTION, OF_SITE
from yieldsim.study.plan import ChancePlan

LEAST_DRAWS, MOST_DRAWS = 50, 20_000
DRAWN_BY_YEAR = "year"  # left out, a site with several years draws among them; so it has no default of its own
_OF_DEVICE = (*OF_JUNCTION, *OF_ABSORBER)
_ELSEWHERE = tuple(each.name for each in INPUTS if each.name not in _OF_DEVICE)


def _spreads(called: str, names: Iterable[str]) -> Any:
    """Return a section with one standard deviation for each input."""
    fields: dict[str, Any] = {}
    for name in names:
        each = BY_NAME[name]
        words = f"{each.words}; {each.spread:g} if left out: {each.reason}"
        number = Annotated[float, Number(0, each.highest, each.unit)]
        fields[name] = (number | None, Field(default=None, description=words))
    return create_model(called, __base__=Section, __doc__="Standard deviations; 0 leaves an input out.", **fields)


Everywhere: Any = _spreads("Spreads", BY_NAME)
AtSite: Any = _spreads("SpreadsAtSite", _ELSEWHERE)
OfAbsorber: Any = _spreads("SpreadsOfAbsorber", _OF_DEVICE)


_CORRELATION = Number(0, 1)
_TIES: dict[str, Any] = dict.fromkeys(OF_SITE, (Annotated[float, _CORRELATION], 0.0))
Correlations: Any = create_model(
    "Correlations", __base__=Section, __doc__="Between sites, of each input that is a site's own.", **_TIES
)


def _form(value: Any) -> str:
    return "by_input" if isinstance(value, dict) else "one"


class Chance(Section):
    """How sure a ranking is: draws of all that is not known, the same for every absorber."""

    draws: Annotated[int, Whole(LEAST_DRAWS, MOST_DRAWS)] = Field(
        default=400, description="how many; more of them begin with the fewer; 400, 800, 1600 are spread most evenly"
    )
    seed: Annotated[int, Whole(0, 2**53)] = Field(default=0, description="another seed, other draws")
    margin: Annotated[float, Number(0, 1)] = Field(
        default=0.01, description="lead asked about, as a share of the other's yield"
    )
    spreads: Everywhere = Field(default_factory=Everywhere, description="over the defaults")
    correlation: Annotated[
        Annotated[Annotated[float, _CORRELATION], Tag("<one>")] | Annotated[Correlations, Tag("<by_input>")], by(_form)
    ] = Field(default=0.0, description="of sites' own inputs between sites: one number, or one for each input")
    sites: dict[Name, AtSite] = Field(default_factory=dict, description="spreads at one site")
    absorbers: dict[Name, OfAbsorber] = Field(default_factory=dict, description="spreads of one absorber")


def chance_plan(chance: Chance) -> ChancePlan:
    """Return the plan of the draws, every default filled in but that of the year."""
    given = chance.spreads.model_dump(exclude_none=True)
    filled = {each.name: each.spread for each in INPUTS if each.name != DRAWN_BY_YEAR} | given
    tie = chance.correlation
    shared = dict.fromkeys(OF_SITE, tie) if isinstance(tie, float) else tie.model_dump()
    return ChancePlan(
        draws=chance.draws,
        seed=chance.seed,
        margin=chance.margin,
        spreads=filled,
        correlation=shared,
        sites={name: each.model_dump(exclude_none=True) for name, each in chance.sites.items()},
        absorbers={name: each.model_dump(exclude_none=True) for name, each in chance.absorbers.items()},
    )


def resolved(plan: ChancePlan) -> dict[str, Any]:
    """Return a plan of draws as a study file holds it."""
    return {
        "draws": plan.draws,
        "seed": plan.seed,
        "margin": plan.margin,
        "spreads": dict(plan.spreads),
        "correlation": dict(plan.correlation),
        "sites": {name: dict(each) for name, each in plan.sites.items()},
        "absorbers": {name: dict(each) for name, each in plan.absorbers.items()},
    }
