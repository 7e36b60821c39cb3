"""What befalls a run from outside: killed, no room, no right, gone, changed. Finished work survives, no half is taken
for a whole, and the next run gives the bytes of an unbroken one."""

import json
import os
import shutil
import signal
import subprocess
import sys
import warnings
from pathlib import Path

import pytest

import yieldsim
from yieldsim import cli
from yieldsim.errors import InputError, PlaceError
from yieldsim.study import store

SAMPLES = Path(__file__).parents[2] / "weather_samples"
STUDY = """
study: faults
mounting: {tilt_deg: 30, azimuth_deg: 180}
sites:
  - {name: Mesa, weather: mesa.csv, allow_gaps: true}
  - {name: Moor, weather: moor.csv, allow_gaps: true}
absorbers: [{name: silicon, like: c-si}, {name: film, like: cdte}]
keep: [annual, monthly, hourly]
"""
HOURS = 240

pytestmark = pytest.mark.skipif(os.name != "posix", reason="signals, limits and mounts of a Unix system")


@pytest.fixture
def study(tmp_path):
    for name, sample in (("mesa", "amber_mesa"), ("moor", "highmoor")):
        lines = (SAMPLES / f"{sample}.csv").read_text(encoding="utf-8").splitlines(keepends=True)
        first = next(i for i, line in enumerate(lines) if line[:1].isdigit())
        (tmp_path / f"{name}.csv").write_text("".join(lines[: first + HOURS]), encoding="utf-8")
    path = tmp_path / "study.yaml"
    path.write_text(STUDY, encoding="utf-8")
    return path


@pytest.fixture
def unbroken(study, tmp_path):
    yieldsim.run_study(yieldsim.load_study(study), tmp_path / "unbroken")
    return tables(tmp_path / "unbroken")


def tables(folder):
    return {file.name: file.read_bytes() for file in folder.glob("*.csv")}


def again(study, folder):
    yieldsim.run_study(yieldsim.load_study(study), folder)
    assert not list(folder.rglob("*.part"))
    return tables(folder)


def in_child(work):
    """Return how a forked process ends that does the work: its exit code, or the signal that killed it, negative."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # threads of libraries, none of which is at work
        pid = os.fork()
    if pid == 0:
        try:
            work()
        finally:
            os._exit(0)
    return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1])


def test_killed_at_every_file_that_is_put_in_place(study, unbroken, tmp_path):
    plan, real = yieldsim.load_study(study), os.replace
    kills = 0
    for nth in range(1, 100):
        folder = tmp_path / f"killed{nth}"

        def work(nth=nth, folder=folder):
            calls = 0

            def replace(*places):
                nonlocal calls
                calls += 1
                if calls == nth:
                    os.kill(os.getpid(), signal.SIGKILL)
                real(*places)

            os.replace = replace
            yieldsim.run_study(plan, folder)

        if in_child(work) == 0:
            break
        kills += 1
        finished = set(tables(folder).items())
        assert finished <= set(unbroken.items())  # no half of a table
        if nth % 4 == 0 or "annual.csv" in tables(folder):
            assert again(study, folder) == unbroken
        shutil.rmtree(folder)
    assert kills > 12  # two sites' hours and pieces, the tables, the page, the record


LIMITED = """
import resource, signal, sys
from yieldsim.cli import main
words, most = ["run", sys.argv[1], "--workers", "1", "--quiet", "--out"], int(sys.argv[3])
main([*words, sys.argv[2] + "-before"])  # all is compiled: its cache has a limit of its own
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, (most, most))
sys.exit(main([*words, sys.argv[2]]))
"""


@pytest.mark.parametrize("most", [500, 30_000])
def test_no_room_for_a_file(study, unbroken, tmp_path, most):
    """A limit to the size of files, which needs no rights; 500 bytes: nothing fits, 30 kB: a site, but no page."""
    folder = tmp_path / "limited"
    words = [sys.executable, "-B", "-c", LIMITED, str(study), str(folder), str(most)]
    done = subprocess.run(words, capture_output=True, text=True)
    assert done.returncode == 2, done.stderr
    assert "cannot write" in done.stderr
    assert "run again" in done.stderr
    assert "Traceback" not in done.stderr
    assert again(study, folder) == unbroken


@pytest.fixture
def small_disk(tmp_path):
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = shutil.which("mount")
    if (
        mount is None
        or subprocess.run([mount, "-t", "tmpfs", "-o", "size=40k", "tmpfs", folder], capture_output=True).returncode
    ):
        pytest.skip("no right to mount a small disk here")
    yield folder
    subprocess.run(["umount", folder], check=True)


def test_a_full_disk(study, unbroken, small_disk):
    with pytest.raises(PlaceError, match="No space left"):
        yieldsim.run_study(yieldsim.load_study(study), small_disk / "out")
    assert set(tables(small_disk / "out").items()) <= set(unbroken.items())
    subprocess.run(["mount", "-o", "remount,size=50m", small_disk], check=True)
    assert again(study, small_disk / "out") == unbroken


def test_a_disk_that_cannot_be_written(study, small_disk):
    subprocess.run(["mount", "-o", "remount,ro", small_disk], check=True)
    with pytest.raises(PlaceError, match="Read-only"):
        yieldsim.run_study(yieldsim.load_study(study), small_disk / "out")


def test_a_folder_taken_away_while_it_is_filled(study, unbroken, tmp_path):
    folder = tmp_path / "taken"

    def progress(_what, finished, _all):
        if finished == 1:
            shutil.rmtree(folder)

    with pytest.raises(PlaceError, match="run again"):
        yieldsim.run_study(yieldsim.load_study(study), folder, progress=progress)
    assert again(study, folder) == unbroken


def test_two_runs_into_one_folder(study, tmp_path):
    plan = yieldsim.load_study(study)
    with store.held(tmp_path / "out"):
        held = in_child(lambda: os._exit(7 if refused(plan, tmp_path / "out") else 0))
    assert held == 7
    assert not refused(plan, tmp_path / "out")


def refused(plan, folder):
    try:
        yieldsim.run_study(plan, folder)
    except PlaceError as error:
        return "in use by another run" in str(error)
    return False


def test_weather_changed_while_it_is_used(study, tmp_path):
    plan, weather = yieldsim.load_study(study), study.parent / "mesa.csv"
    text = weather.read_text(encoding="utf-8")
    weather.write_text(text.rsplit("\n", 2)[0] + "\n", encoding="utf-8")  # the last hour is gone
    with pytest.raises(InputError) as caught:
        yieldsim.run_study(plan, tmp_path / "out")
    (problem,) = caught.value.problems
    assert (problem.file, "run again" in problem.allowed) == ("mesa.csv", True)
    pieces = {file.stem for file in (tmp_path / "out" / ".pieces").glob("*.json")}
    assert pieces == {"Moor"}  # what stayed as it was is finished
    fresh = again(study, tmp_path / "out")
    yieldsim.run_study(yieldsim.load_study(study), tmp_path / "other")
    assert fresh == tables(tmp_path / "other")


def test_a_run_is_repeated_byte_for_byte_from_its_record(study, unbroken, tmp_path, capsys):
    assert cli.main(["run", "--from", str(tmp_path / "unbroken" / "run.json"), "--out", str(tmp_path / "anew")]) == 0
    said = capsys.readouterr()
    assert f"all {len(unbroken)} tables are those of the record" in said.out
    assert "differs" not in said.err
    assert tables(tmp_path / "anew") == unbroken
    records = [json.loads((tmp_path / name / "run.json").read_text()) for name in ("unbroken", "anew")]
    assert records[0]["fingerprint"] == records[1]["fingerprint"]
    assert records[0]["fingerprint"] in (tmp_path / "anew" / "report.html").read_text(encoding="utf-8")
