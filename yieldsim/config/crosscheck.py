"""What only the whole study can tell: names given twice, names that nothing bears.

Looks at the plain data, so that it has its say also where other parts of the study are wrong.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain, islice
from typing import Any

from yieldsim.config.fields import MOST_PROBLEMS, folded, nearest, show
from yieldsim.config.tree import Document, KeyPath
from yieldsim.errors import Problem

RESERVED = ("standard spectrum",)  # what gap_sweep.csv calls the rows without a site

Named = list[tuple[KeyPath, str]]


def problems(document: Document) -> list[Problem]:
    """Return what is wrong between the parts of a study, as many problems as are told."""
    study = document.data
    if not isinstance(study, dict):
        return []
    found = chain(
        _repeated(document, _names(study, "sites"), "sites"),
        _repeated(document, _names(study, "absorbers"), "absorbers"),
        _reserved(document, _names(study, "sites")),
        _repeated(document, _quality_names(study, "gap_sweep"), "qualities"),
        _repeated(document, _quality_names(study, "gap_pairs"), "qualities"),
        _reference(document, study),
        _mountings(document, study),
        _weather_twice(document, study),
        _portfolio(document, study),
        _worth(document, study),
        _chance(document, study),
    )
    return list(islice(found, MOST_PROBLEMS))


def _items(study: dict[str, Any], section: str) -> Iterator[tuple[KeyPath, dict[str, Any]]]:
    items = study.get(section)
    for i, item in enumerate(items if isinstance(items, list) else []):
        if isinstance(item, dict):
            yield (section, i), item


def _names(study: dict[str, Any], section: str) -> Named:
    return [
        ((*path, "name"), item["name"])
        for path, item in _items(study, section)
        if isinstance(item.get("name"), str) and item["name"]
    ]


def _quality_names(study: dict[str, Any], section: str) -> Named:
    sweep = study.get(section)
    qualities = sweep.get("quality") if isinstance(sweep, dict) else None
    if not isinstance(qualities, list):
        return []
    names = []
    for i, quality in enumerate(qualities):
        path: KeyPath = (section, "quality", i)
        if isinstance(quality, str):
            names.append((path, quality))
        elif isinstance(quality, dict) and isinstance(quality.get("name"), str):
            names.append(((*path, "name"), quality["name"]))
    return names


def _repeated(document: Document, names: Named, of: str) -> Iterator[Problem]:
    first: dict[str, KeyPath] = {}
    for path, name in names:
        earlier = first.setdefault(folded(name), path)
        if earlier != path:
            found = f"the name {show(name)} again (first in line {document.mark(earlier).line})"
            yield document.problem(path, found, f"names of {of} that differ by more than case")


def _reserved(document: Document, names: Named) -> Iterator[Problem]:
    for path, name in names:
        if folded(name) in RESERVED:
            yield document.problem(path, f"the name {show(name)}", "another name: the results use this one")


def _reference(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    name = study.get("reference")
    names = [absorber for _, absorber in _names(study, "absorbers")]
    absorbers = study.get("absorbers")
    known = isinstance(absorbers, list) and len(names) == len(absorbers)  # one without a name may be the one meant
    if isinstance(name, str) and known and name not in names:
        yield document.problem(("reference",), show(name), f"the name of an absorber{nearest(name, names)}")


def _mountings(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    shared = study.get("mounting")
    names: dict[str, Any] = {}
    if isinstance(shared, dict) and shared:
        several = "kind" not in shared and all(isinstance(each, dict) for each in shared.values())
        names = shared if several else {str(shared.get("kind", "fixed")): shared}
    if shared is not None:
        yield from _repeated_keys(document, ("mounting",), names)
    for path, site in _items(study, "sites"):
        own = site.get("mounting")
        if own is None and shared is None:
            yield document.problem(path, "no mounting", "`mounting` here, or one for the whole study")
        if isinstance(own, dict):
            yield from _repeated_keys(document, (*path, "mounting"), own)
        for name in own if isinstance(own, list) else [own] if isinstance(own, str) else []:
            if isinstance(name, str) and name not in names:
                allowed = "a mounting of this site, or the name of one of the study's"
                yield document.problem((*path, "mounting"), show(name), allowed + nearest(name, names))


def _repeated_keys(document: Document, path: KeyPath, mapping: dict[str, Any]) -> Iterator[Problem]:
    names = [((*path, key), key) for key in mapping if isinstance(key, str)]
    yield from _repeated(document, names, "mountings")


def _weather_twice(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    for path, site in _items(study, "sites"):
        files = site.get("weather")
        if not isinstance(files, list):
            continue
        seen: set[str] = set()
        for i, file in enumerate(files):
            if isinstance(file, str):
                if file in seen:
                    yield document.problem((*path, "weather", i), f"{show(file)} again", "each weather file once")
                seen.add(file)


def _unknown(
    document: Document, path: KeyPath, given: dict[Any, Any], names: list[str], wanted: str
) -> Iterator[Problem]:
    """Find keys that name nothing the study has."""
    known = set(names)
    for name in given:
        if name not in known:
            yield document.problem((*path, str(name)), show(name), wanted + nearest(name, names), of_key=True)


def _portfolio(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    weights = study.get("portfolio")
    sites = [name for _, name in _names(study, "sites")]
    if not isinstance(weights, dict) or not sites:
        return
    yield from _unknown(document, ("portfolio",), weights, sites, "the name of a site")
    numbers = [weight for weight in weights.values() if isinstance(weight, int | float)]
    if weights and len(numbers) == len(weights) and not any(weight > 0 for weight in numbers):
        yield document.problem(("portfolio",), "no weight above 0", "at least one site that counts")


def _worth(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    worth = study.get("worth")
    names = [name for _, name in _names(study, "absorbers")]
    if not isinstance(worth, dict) or not names:
        return
    for key in _BY_ABSORBER:
        if isinstance(worth.get(key), dict):
            yield from _unknown(document, ("worth", key), worth[key], names, "the name of an absorber")
    prices: list[dict[str, Any]] = [worth[key] for key in _BY_ABSORBER[:2] if isinstance(worth.get(key), dict)]
    if len(prices) < sum(worth.get(key) is not None for key in _BY_ABSORBER[:2]):
        return  # one price for all
    missing = [name for name in names if prices and not any(name in each for each in prices)]
    if missing:
        yield document.problem(("worth",), f"no module price for {', '.join(missing)}", "a price for each absorber")
    for name in set(prices[0]) & set(prices[1]) if len(prices) == 2 else ():
        yield document.problem(("worth", _BY_ABSORBER[1], str(name)), f"two prices for {name}", "one of the two")


_BY_ABSORBER = ("module_price_per_w", "module_price_per_m2", "degradation_per_year")


def _chance(document: Document, study: dict[str, Any]) -> Iterator[Problem]:
    """Find spreads of sites and absorbers that the study does not have."""
    chance = study.get("chance")
    for section in ("sites", "absorbers") if isinstance(chance, dict) else ():
        given = chance.get(section) if isinstance(chance, dict) else None
        items = study.get(section)
        names = [name for _, name in _names(study, section)]
        if not isinstance(given, dict) or not isinstance(items, list) or len(names) < len(items):
            continue
        yield from _unknown(document, ("chance", section), given, names, f"the name of one of the {section}")
