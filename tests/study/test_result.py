import numpy as np
import pandas as pd
import pytest
import xarray as xr

from yieldsim import spectrum
from yieldsim.constants import PHOTON_EV_NM
from yieldsim.device.junction import Junction
from yieldsim.device.response import Response, step
from yieldsim.device.stack import Absorber
from yieldsim.study.result import by_hour_table, edges_nm, ideal_names, records, responses_table


def _hourly(power, utc_offset_h=0.0, start="2023-01-01T00:00"):
    times = np.datetime64(start, "ns") + np.arange(len(power)) * np.timedelta64(1, "h")
    return xr.Dataset(
        {"power": (("mounting", "absorber", "time"), np.asarray(power)[None, None, :])},
        {"time": times, "mounting": ["fixed"], "absorber": ["a"]},
        {"utc_offset_h": utc_offset_h},
    )


def test_hours_of_a_year_add_up_to_its_yield():
    power = np.maximum(0, np.sin(np.arange(8760) / 24 * 2 * np.pi)) * 150
    table = by_hour_table("One", _hourly(power), {"a": 200.0})
    # sums of float64: rounding only
    assert table["specific_yield_kwh_kwp"].sum() == pytest.approx(power.sum() / 200.0, rel=1e-12)
    assert table["month"].between(1, 12).all()
    assert (table["specific_yield_kwh_kwp"] > 0).all()


@pytest.mark.parametrize(("offset", "month", "hour"), [(0.0, 1, 12), (5.5, 1, 18), (-13.0, 12, 23)])
def test_an_hour_is_counted_at_local_standard_time(offset, month, hour):
    power = np.zeros(24)
    power[12] = 100.0
    (row,) = records(by_hour_table("One", _hourly(power, offset), {"a": 100.0}))
    assert (row["month"], row["hour"]) == (month, hour)
    assert row["specific_yield_kwh_kwp"] == 1.0


def test_a_step_response_collects_all_above_its_gap_and_nothing_below():
    table = responses_table([Absorber("step", (Junction(1.4, step(1.4)),))])
    edge = PHOTON_EV_NM / 1.4
    edges = spectrum.band_edges()
    share = table["collected_share"].to_numpy()
    # whole bands above and below the gap; what is left is rounding of two equal sums
    assert share[edges[1:] < edge] == pytest.approx(1.0, abs=1e-9)
    assert share[edges[:-1] > edge] == pytest.approx(0.0, abs=1e-12)
    cut = (edges[:-1] < edge) & (edges[1:] > edge)
    assert 0 < share[cut][0] < 1


def test_half_a_response_collects_half():
    flat = Response(np.array([300.0, 1300.0]), np.array([0.5, 0.5]))
    table = responses_table([Absorber("half", (Junction(1.0, flat),))])
    inside = table["wavelength_nm"].between(400, 1100)
    # exact quadrature on both sides of the ratio
    assert table["collected_share"][inside].to_numpy() == pytest.approx(0.5, abs=1e-9)


def test_edges_of_gaps_and_stacks():
    assert edges_nm("1.12") == (PHOTON_EV_NM / 1.12,)
    assert edges_nm(1.12) == edges_nm("1.12")
    assert edges_nm("1.68/1.12") == (PHOTON_EV_NM / 1.68, PHOTON_EV_NM / 1.12)


def test_rows_keep_names_that_are_no_identifiers():
    assert records(pd.DataFrame({"a b": [1], "class": [2]})) == [{"a b": 1, "class": 2}]


def test_half_hours_bring_half_the_energy():
    """Energy is power times time: 100 W/m2 for one of two half hours, over 200 W/m2 rated."""
    found = _hourly([100.0, 0.0, 100.0, 100.0])
    half = found.assign_coords(time=found["time"].values[0] + np.arange(4) * np.timedelta64(30, "m"))
    for dataset, energy in ((found, [100, 100, 100]), (half, [50, 100])):
        table = by_hour_table("here", dataset, {"a": 200.0})
        assert list(table["specific_yield_kwh_kwp"]) == pytest.approx([each / 200.0 for each in energy])


def test_only_ideal_entries_are_limits():
    """A stack is one if all its parts are; any other quality, or none, is a device."""
    ideal, real = {"quality": "ideal"}, {"quality": "as c-si"}
    entries = [
        {"name": "a", **ideal}, {"name": "b", **real}, {"name": "c"}, {"name": "d", "stack": [ideal, ideal]},
        {"name": "e", "stack": [ideal, real]},
    ]  # fmt: skip
    assert ideal_names({"absorbers": entries}) == ("a", "d")
