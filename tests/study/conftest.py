"""One real station's year, computed once for all tests of the account."""

import numpy as np
import pytest

from yieldsim import readers, screen
from yieldsim.config import library
from yieldsim.study import annual, hourly, light
from yieldsim.study.plan import AtmospherePlan, LossesPlan, MountingPlan, SitePlan

TILTED = MountingPlan("fixed", "fixed", 30.0, 180.0)
NAMES = ("c-si", "cdte", "cigs", "gaas", "a-si", "perovskite-1.55", "perovskite-1.68")
LOSSES = LossesPlan({"soiling": (0.02,) * 12, "wiring": (0.015,) * 12})


class Year:
    """A site computed to the end of the account."""

    def __init__(self, weather, atmosphere=None, mounting=TILTED, names=NAMES):
        self.plan = SitePlan("here", (), (mounting,), atmosphere or AtmospherePlan())
        self.weather = weather
        self.absorbers = tuple(library.entry(name).absorber for name in names)
        self.sky = hourly.site_sky(self.plan, weather)
        self.parts = light.plane_parts(self.sky, mounting)
        self.plane = hourly.plane_year(self.sky, mounting, self.parts, self.absorbers)
        hours = np.bincount(hourly.local_month_and_day(weather)[0], minlength=12) * weather.interval_s / 3600
        self.sums = annual.sums(self.plane, self.sky.month, hours, weather.interval_s, LOSSES)
        self.ratings = annual.Ratings.of(self.absorbers)
        self.months = annual.factors(self.sums, self.ratings)
        self.year = annual.factors(self.sums.year(), self.ratings)

    def factor(self, kind, name):
        return float(getattr(self.year, kind)[NAMES.index(name), 0])

    def monthly(self, kind, name):
        return getattr(self.months, kind)[NAMES.index(name)]


@pytest.fixture(scope="session")
def year_of():
    return Year


@pytest.fixture(scope="session")
def greensboro_weather():
    """TMY3 station 723170, Greensboro NC, which pvlib ships (NREL, public domain)."""
    return screen.screen(readers.read("pvlib:723170TYA.CSV"))


@pytest.fixture(scope="session")
def greensboro(greensboro_weather):
    return Year(greensboro_weather)


@pytest.fixture(scope="session")
def sand_point():
    """TMY3 station 703165, Sand Point AK, which pvlib ships (NREL, public domain)."""
    return Year(screen.screen(readers.read("pvlib:703165TY.csv")))
