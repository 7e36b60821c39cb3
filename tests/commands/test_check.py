"""`yieldsim check`: what would be computed, from which data, and whether the weather is fit."""

from pathlib import Path

import pytest

from yieldsim.cli import main

STUDY = """\
study: look
mounting: {{kind: fixed, tilt_deg: 30, azimuth_deg: 180}}
sites:
{sites}
absorbers:
  - {{name: silicon, like: c-si}}
  - {{name: ideal, gap_ev: 1.34, quality: ideal}}
losses: {{soiling: [0.01, 0.01, 0.01, 0.02, 0.02, 0.02, 0.02, 0.02, 0.02, 0.01, 0.01, 0.01], wiring: 0.015}}
gap_sweep: {{from_ev: 0.9, to_ev: 2.0, step_ev: 0.1}}
"""
STATION = '  - {name: Greensboro, weather: "pvlib:723170TYA.CSV"}'


@pytest.fixture
def checked(tmp_path, capsys, monkeypatch):
    """Return what checks a study with the given sites: exit code, stdout, stderr."""
    monkeypatch.chdir(tmp_path)

    def check(*sites):
        file = tmp_path / "look.yaml"
        file.write_text(STUDY.format(sites="\n".join(sites)), encoding="utf-8")
        code = main(["check", str(file)])
        said = capsys.readouterr()
        return code, said.out, said.err

    return check


def test_a_real_station(checked):
    code, out, err = checked(STATION)
    assert (code, err) == (0, "")
    assert "outputs/look/weather_quality.csv" in out
    assert Path("outputs/look/weather/Greensboro.png").read_bytes().startswith(b"\x89PNG")
    assert "weather/Greensboro.png" in out
    table = Path("outputs/look/weather_quality.csv").read_text(encoding="utf-8")
    assert table.startswith("site,kind,rows,first,last,found,done\n")
    assert "Greensboro,night_light,1," in table
    assert "Greensboro,source:aod500," in table
    for said in (
        "look: 1 site, 1 plane in all, 2 absorbers, set against silicon",
        "12 from 0.9 to 2 eV; quality: ideal, realistic",
        "soiling 1 to 2 %",
        "wiring 1.5 %",
        "Greensboro: usable",
        "36.10 N, 79.95 W",
        "UTC-5",
        "8760 h",
        "water: file",
        "air      aod500: ",
        "fixed, 30 deg tilt, azimuth 180 deg",
        "night_light, 1 rows",
    ):
        assert said in out


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"time,ghi,dni,dhi,temp_air,wind_speed\n" + b"2021-01-01T00:00,0,0,0,1,1\n", "bad.csv:1: "),
        (b"Dear all,\nthe weather was fine.\n", "no known weather format"),
        (b"", ""),
        (b"\x00\x01\x02" * 100, "not text"),
    ],
    ids=["one row", "prose", "empty", "binary"],
)
def test_weather_that_cannot_be_used_is_named(checked, tmp_path, content, said):
    (tmp_path / "bad.csv").write_bytes(content)
    code, out, err = checked("  - {name: Broken, weather: bad.csv}")
    assert code == 1
    assert "Broken: not usable" in out
    assert "bad.csv" in err
    assert said in err
    assert "Traceback" not in err


def test_the_other_sites_are_still_looked_at(checked, tmp_path):
    (tmp_path / "bad.csv").write_bytes(b"prose")
    code, out, _ = checked("  - {name: Broken, weather: bad.csv}", STATION)
    assert code == 1
    assert "Broken: not usable" in out
    assert "Greensboro: usable" in out


def test_a_file_of_twenty_rows(checked, tmp_path):
    head = "# latitude_deg: 50\n# longitude_deg: 8\n# elevation_m: 100\n# utc_offset_h: 1\n"
    rows = [f"2021-01-01T{hour:02d}:00,0,0,0,1,1" for hour in range(20)]
    text = head + "\n".join(["time,ghi,dni,dhi,temp_air,wind_speed", *rows, ""])
    (tmp_path / "short.csv").write_text(text, encoding="utf-8")
    code, _, err = checked("  - {name: Short, weather: short.csv}")
    assert code == 1
    assert "20 hours" in err
    assert "allow_gaps" in err
