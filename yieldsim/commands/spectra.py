"""``yieldsim spectra``: hourly band spectra of one site as CF NetCDF."""

from __future__ import annotations

import argparse
from pathlib import Path

EXAMPLE = """example:
  yieldsim spectra mine.yaml --site "Saltmarsh Point" --from 2001-06-01 --to 2001-06-08
        writes every lit hour of the first week of June, UTC, to
        outputs/STUDY/spectra of Saltmarsh Point.nc
"""


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("study", metavar="STUDY.yaml", type=Path, help="the study file")
    parser.add_argument("--site", metavar="NAME", required=True, help="a site of the study")
    parser.add_argument(
        "--from", metavar="T", dest="start", type=moment, help="first moment, ISO 8601; UTC unless it says"
    )
    parser.add_argument("--to", metavar="T", dest="end", type=moment, help="moment to stop before")
    parser.add_argument("--out", metavar="FILE.nc", type=Path, help="the file to write")


def moment(text: str) -> int:
    """Return the unix seconds of a moment in ISO 8601; UTC where it names no offset."""
    from datetime import UTC, datetime

    try:
        when = datetime.fromisoformat(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"found {text!r}; allowed: a moment such as 2001-06-01T12:00") from None
    return int((when if when.tzinfo else when.replace(tzinfo=UTC)).timestamp())


def run(options: argparse.Namespace) -> int:
    """Compute the site's spectra and write them."""
    from yieldsim import api
    from yieldsim.study import store

    plan = api.load_study(options.study)
    dataset = api.site_spectra(plan, options.site, options.start, options.end)
    site = dataset.attrs["site"]
    default = Path("outputs", store.file_stem(plan.name), f"spectra of {store.file_stem(site)}.nc")
    out = options.out if options.out is not None else default
    store.write_netcdf(out, dataset)
    print(f"{dataset.sizes['time']} lit intervals of {site}: {out}")
    return 0
