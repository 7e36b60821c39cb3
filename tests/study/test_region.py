"""A grid of sites: the dataset of its results, worked off here, in processes, on a cluster, and after being killed."""

import os
import random
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from yieldsim import api, readers
from yieldsim.errors import PlaceError
from yieldsim.study import region, store

SAMPLES = Path(__file__).parents[2] / "weather_samples"
DIMS = ("time", "latitude", "longitude")
STUDY = """
study: region
sites: {grid: grid.nc}
mounting: {kind: fixed, tilt_deg: 30, azimuth_deg: 180}
absorbers: [{name: silicon, like: c-si}, {name: film, like: cdte}]
gap_sweep: {from_ev: 1.1, to_ev: 1.5, step_ev: 0.1, quality: ideal}
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A study of an invented region of 2 x 3 cells, one of them without weather."""
    folder = tmp_path_factory.mktemp("region")
    weather = readers.read(str(SAMPLES / "saltmarsh_point.csv"))
    latitude, longitude = np.array([46.0, 50.0]), np.array([-2.0, 0.0, 2.0])
    level = np.array([[1.0, 0.9, 0.8], [0.7, np.nan, 0.6]])
    data = {name: (DIMS, weather[name][:, None, None] * level, {"units": "W m-2"}) for name in ("ghi", "dni", "dhi")}
    data |= {
        name: (DIMS, np.broadcast_to(weather[name][:, None, None], (8760, 2, 3)), {"units": unit})
        for name, unit in (("temp_air", "degC"), ("wind_speed", "m s-1"), ("relative_humidity", "%"))
    }
    time_axis = ("time", weather.time, {"units": "seconds since 1970-01-01"})
    grid = xr.Dataset(data, {"time": time_axis, "latitude": latitude, "longitude": longitude})
    encoding = {name: {"zlib": True, "complevel": 1} for name in data}
    grid.to_netcdf(folder / "grid.nc", engine="h5netcdf", encoding=encoding)
    (folder / "region.yaml").write_text(STUDY, encoding="utf-8")
    return folder


@pytest.fixture(scope="module")
def plan(folder):
    return api.load_study(folder / "region.yaml")


@pytest.fixture(scope="module")
def whole(folder, plan):
    """The region worked off in one process."""
    api.run_study(plan, folder / "whole")
    return folder / "whole"


def bytes_of(path):
    return {file.name: file.read_bytes() for file in path.glob("*.csv")} | {
        "region": xr.open_dataset(path / "region.nc", engine="h5netcdf").load()
    }


def same(one, two):
    first, second = bytes_of(one), bytes_of(two)
    assert set(first) == set(second)
    for name, content in first.items():
        if name == "region":
            xr.testing.assert_identical(content, second[name])
        else:
            assert content == second[name], name


def test_every_cell_lies_where_its_site_does(plan, whole):
    """Definition: each cell of region.nc is its row of annual.csv; the one without weather is not a number."""
    import pandas as pd

    annual = pd.read_csv(whole / "annual.csv")
    with xr.open_dataset(whole / "region.nc", engine="h5netcdf") as found:
        assert found.sizes["latitude"] == 2
        assert found.sizes["longitude"] == 3
        for row in annual.itertuples():
            site = next(site for site in plan.sites if site.name == row.site)
            cell = found.sel(latitude=site.latitude_deg, longitude=site.longitude_deg, absorber=row.absorber)
            assert float(cell["energy_kwh_m2"].item()) == pytest.approx(row.energy_kwh_m2, rel=1e-11)
            assert int(cell["rank_by_yield"].item()) == row.rank_by_yield
        empty = found.sel(latitude=50.0, longitude=0.0)
        assert np.isnan(empty["energy_kwh_m2"]).all()
        assert int(empty["best_absorber"].item()) == -1
        assert np.isnan(empty["margin"]).all()
        light = found["poa_kwh_m2"].values[0]
        assert light[0, 0] > light[0, 1] > light[0, 2] > light[1, 0] > light[1, 2]


def test_winner_margin_and_best_gap_are_those_of_the_tables(plan, whole):
    import pandas as pd

    annual, sweep = pd.read_csv(whole / "annual.csv"), pd.read_csv(whole / "gap_sweep.csv")
    site = plan.sites[0]
    mine = annual[annual["site"] == site.name].sort_values("energy_kwh_m2")
    gaps = sweep[sweep["site"] == site.name]
    with xr.open_dataset(whole / "region.nc", engine="h5netcdf") as found:
        cell = found.sel(latitude=site.latitude_deg, longitude=site.longitude_deg).isel(mounting=0)
        assert str(found["absorber"].values[int(cell["best_absorber"])]) == mine["absorber"].iloc[-1]
        energy = mine["energy_kwh_m2"].to_numpy()
        assert float(cell["margin"]) == pytest.approx(energy[-1] / energy[-2] - 1, rel=1e-9)
        best = gaps.loc[gaps["energy_kwh_m2"].idxmax(), "gap_ev"]
        assert float(cell["best_gap_ev"].isel(quality=0)) == best


def test_an_ideal_absorber_wins_nowhere_where_two_others_remain(plan, whole):
    """As in the answer and the regrets: a limit that no device reaches is no choice."""
    from dataclasses import replace

    import pandas as pd

    annual = pd.read_csv(whole / "annual.csv")
    limit = annual[annual["absorber"] == "film"].assign(absorber="limit")
    limit["energy_kwh_m2"] *= 3
    more = replace(plan, absorbers=(replace(plan.absorbers[0], name="limit"), *plan.absorbers))
    columns = pd.concat([limit, annual]).to_dict("list")
    without, among = (region.dataset(more, columns, None, ideal) for ideal in (["limit"], []))
    known = among["best_absorber"].values >= 0
    assert set(among["best_absorber"].values[known]) == {0}
    assert set(without["best_absorber"].values[known]) == {1}  # silicon, as without the limit
    with xr.open_dataset(whole / "region.nc", engine="h5netcdf") as found:
        np.testing.assert_allclose(without["margin"].values, found["margin"].values, rtol=1e-9)


def test_a_grid_keeps_its_maps_and_little_else(whole):
    assert (whole / "plots" / "region.png").is_file()
    assert not (whole / "hourly").exists()
    assert not (whole / "monthly.csv").exists()


def test_a_list_of_sites_is_no_region(plan):
    from dataclasses import replace

    assert region.is_region(plan)
    bare = replace(plan.sites[0], weather=(replace(plan.sites[0].weather[0], cell=None),))
    assert not region.is_region(replace(plan, sites=(bare, *plan.sites[1:])))


def test_two_processes_give_the_same(folder, plan, whole):
    api.run_study(plan, folder / "two", workers=2)
    same(whole, folder / "two")


def test_only_what_changed_is_computed_again(folder, plan, whole):
    """Content hashes: an unchanged study computes nothing; another loss computes all; a missing piece that one."""
    seen = []

    def watch(name, _done, _all):
        seen.append(name)

    api.run_study(plan, whole, progress=watch)
    assert seen == ["report"]
    name = plan.sites[1].name
    (whole / store.PIECES / f"{store.file_stem(name)}.json").unlink()
    seen.clear()
    api.run_study(plan, whole, progress=watch)
    assert seen == [name, "report"]


# ------------------------------------------------------------------------------------------- killed and gone on with


def command(*more):
    return [sys.executable, "-m", "yieldsim", "run", *more, "--quiet"]


def test_killed_at_random_moments_and_gone_on_with(folder, whole):
    """A run killed again and again gives the bytes of an unbroken one; what was finished is not lost."""
    moments = random.Random(5)
    out, finished = folder / "killed", 0
    for _ in range(8):
        run = subprocess.Popen(command(str(folder / "region.yaml"), "--out", str(out)), stderr=subprocess.DEVNULL)
        try:
            run.wait(timeout=moments.uniform(1.5, 5.0))
            break
        except subprocess.TimeoutExpired:
            run.send_signal(signal.SIGKILL)
            run.wait()
        pieces = len(list((out / store.PIECES).glob("*.json"))) if out.exists() else 0
        assert pieces >= finished
        finished = pieces
    else:
        assert subprocess.run(command(str(folder / "region.yaml"), "--out", str(out)), check=False).returncode == 0
    assert run.returncode in (0, -signal.SIGKILL)
    same(whole, out)
    assert not list(out.rglob("*.part"))


# -------------------------------------------------------------------------------------------------------- a cluster


def _free_port():
    with socket.socket() as found:
        found.bind(("127.0.0.1", 0))
        return found.getsockname()[1]


@pytest.fixture
def cluster(tmp_path):
    """A real scheduler and two worker processes on loopback, by Dask's own commands."""
    pytest.importorskip("distributed", reason="Dask comes with the extra `cluster`")
    port = _free_port()
    address = f"tcp://127.0.0.1:{port}"
    env = os.environ | {"DASK_DISTRIBUTED__WORKER__DAEMON": "False"}

    def start(*words):
        with (tmp_path / f"{words[0]}-{len(running)}.log").open("w") as log:
            line = [sys.executable, "-m", "dask", *words]
            running.append(subprocess.Popen(line, stdout=log, stderr=subprocess.STDOUT, env=env, cwd=tmp_path))
        return running[-1]

    running = []
    start("scheduler", "--host", "127.0.0.1", "--port", str(port), "--no-dashboard")
    workers = [
        start("worker", address, "--nthreads", "1", "--no-nanny", "--no-dashboard", "--memory-limit", "0",
              "--local-directory", str(tmp_path / f"w{i}"))
        for i in range(2)
    ]  # fmt: skip
    yield address, workers
    for each in running:
        each.kill()
        each.wait()


def _both_are_there(address):
    from distributed import Client

    with Client(address, timeout=30, set_as_default=False) as client:
        client.wait_for_workers(2, timeout=60)


def test_a_cluster_gives_the_same_though_a_worker_is_killed(folder, plan, whole, cluster):
    """Two workers, one killed by its process id while it works: time is lost, no result."""
    address, workers = cluster
    _both_are_there(address)
    seen = []

    def kill_one(name, done, _all):
        if not seen:
            workers[0].send_signal(signal.SIGKILL)
        seen.append((name, done))

    api.run_study(plan, folder / "cluster", cluster=address, progress=kill_one)
    assert workers[0].wait(timeout=10) == -signal.SIGKILL
    assert len(seen) == len(plan.sites) + 1
    same(whole, folder / "cluster")


def test_no_scheduler_is_told_of(folder, plan, monkeypatch):
    pytest.importorskip("distributed", reason="Dask comes with the extra `cluster`")
    from yieldsim.study import cluster as elsewhere

    monkeypatch.setattr(elsewhere, "_CONNECT_S", 1)
    start = time.monotonic()
    with pytest.raises(PlaceError, match="no Dask scheduler answers"):
        api.run_study(plan, folder / "nowhere", cluster=f"tcp://127.0.0.1:{_free_port()}")
    assert time.monotonic() - start < 60


def test_winners_of_cells():
    """By hand: mountings x absorbers x cells; a cell without weather has none, and one absorber wins by nothing."""
    energy = np.array([[[[5.0, 1.0, np.nan]], [[4.0, 1.5, np.nan]], [[2.0, 3.0, np.nan]]]])
    best, margin = region._winners(energy)
    np.testing.assert_array_equal(best, [[[0, 2, -1]]])
    np.testing.assert_allclose(margin, [[[0.25, 1.0, np.nan]]])
    for several in (energy[:, :1], np.concatenate([energy, energy])[:, :1]):
        best, margin = region._winners(several)
        np.testing.assert_array_equal(best[0], [[0, 0, -1]])
        np.testing.assert_array_equal(margin[0], [[0.0, 0.0, np.nan]])
