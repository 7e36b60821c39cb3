"""Draws of each site on disk, for what is made of them once all sites are finished."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
import xarray as xr

from yieldsim.study import store
from yieldsim.study.chance import Draws

FOLDER = "draws"
_MEASURES = {
    "specific_yield_kwh_kwp": ("kWh kW-1", "energy of one year per rated power of the label"),
    "energy_kwh_m2": ("kWh m-2", "energy of one year per module area"),
}


def write_draws(folder: Path, site: str, draws: Draws) -> Path:
    """Write a site's draws and return the file."""
    dims = ("draw", "mounting", "absorber")
    variables = {
        name: (dims, getattr(draws, name), {"units": unit, "long_name": text})
        for name, (unit, text) in _MEASURES.items()
    }
    coordinates = {
        "draw": np.arange(1, draws.energy_kwh_m2.shape[0] + 1, dtype=np.int32),
        "mounting": ("mounting", np.array(draws.mountings, dtype=str)),
        "absorber": ("absorber", np.array(draws.absorbers, dtype=str)),
    }
    about = {
        "Conventions": "CF-1.11",
        "title": "what each absorber gives in each draw",
        "site": site,
        "comment": "draw k of every site belongs together: what sites share is drawn once for all of them",
    }
    path = folder / FOLDER / f"{store.file_stem(site)}.nc"
    store.write_netcdf(path, xr.Dataset(variables, coordinates, about))
    return path


def open_draws(folder: Path, sites: Sequence[str]) -> dict[str, Draws]:
    """Return the draws of each site that has any."""
    found = {}
    for site in sites:
        path = folder / FOLDER / f"{store.file_stem(site)}.nc"
        if path.is_file():
            with xr.open_dataset(path, engine="h5netcdf") as dataset:
                found[site] = Draws(
                    tuple(str(name) for name in dataset["mounting"].values),
                    tuple(str(name) for name in dataset["absorber"].values),
                    np.asarray(dataset["specific_yield_kwh_kwp"].values, dtype=np.float64),
                    np.asarray(dataset["energy_kwh_m2"].values, dtype=np.float64),
                )
    return found
