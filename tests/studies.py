"""Hypothesis strategies for whole studies and their weather, made from the schema: a key added there is generated here.

`studies()` draws valid ones, `broken()` ones with anything wrong anywhere, each as a `Kit`: the study as plain data and
the bytes of the files it names. What the schema cannot say (which keys exclude each other, which names must exist) is
told once per section by the functions in `SHAPES`; what they do not touch is drawn from kind, unit and range alone.
"""

import io
import json
import math
from dataclasses import dataclass, field
from functools import cache
from types import NoneType, UnionType
from typing import Annotated, Any, Union, get_args, get_origin

import numpy as np
import xarray as xr
from hypothesis import strategies as st
from pydantic import BaseModel

from tests.strategies import damaged, names
from yieldsim.config import absorber_schema, chance_schema, fields, library, many, mounting_schema, schema, site_schema
from yieldsim.config import worth_schema as worth
from yieldsim.config.crosscheck import RESERVED
from yieldsim.config.inputs import InputFile
from yieldsim.sky import sun
from yieldsim.sky.ground import surfaces
from yieldsim.study.annual import Ratings
from yieldsim.weather import COLUMNS, REQUIRED

MOST_ITEMS = 3  # of a list or mapping: enough for every form, small enough for thousands of studies
GRID = "grid.nc"
TABLE = "sites.csv"


@dataclass
class Kit:
    """A study as plain data, and the files it names by name; ``text`` stands for the data where it is no YAML."""

    data: Any
    files: dict[str, bytes] = field(default_factory=dict)
    text: bytes | None = None

    def write(self, folder):
        """Write all of it into a folder and return the study file."""
        for name, content in {**fixed_files(), **self.files}.items():
            (folder / name).write_bytes(content)
        text = json.dumps(self.data).replace("Infinity", ".inf").replace("NaN", ".nan").encode()
        path = folder / "study.yaml"
        path.write_bytes(text if self.text is None else self.text)
        return path


# ------------------------------------------------------------------------------------------------- files it names

#: Section and key of every file a study names -> one that is right for it; a new key without one fails.
FILES = {
    "Source.eqe": "eqe.csv",
    "Source.response": "response.csv",
    "Material.absorption": "absorption.csv",
    "Ground.surface": "albedo.csv",
    "Site.ground": "albedo.csv",
    "Site.weather": "w0.csv",
    "Site.horizon": "horizon.csv",
    "Worth.energy_price_per_kwh": "prices.csv",
}


@cache
def fixed_files():
    """Return the files that need no drawing."""
    wave = np.arange(300, 1250, 25.0)
    edge = 1 / (1 + np.exp((wave - 1050) / 15))

    def table(head, *columns):
        return "\n".join([head, *(",".join(f"{x:.6g}" for x in row) for row in zip(*columns, strict=True))]).encode()

    absorption = 1e5 * np.clip(1240 / wave - 1.15, 0, None) ** 1.5 + 1e-3
    return {
        "eqe.csv": table("nm,EQE", wave, 0.9 * edge),
        "response.csv": table("nm,A/W", wave, 0.9 * edge * wave / 1240),
        "absorption.csv": table("nm,1/cm,n", wave, absorption, np.full(len(wave), 3.4)),
        "albedo.csv": table("nm,albedo", wave, 0.1 + 0.2 * edge),
        "horizon.csv": table("azimuth,elevation", [0, 90, 180, 270], [5, 0, 12, 3]),
        "prices.csv": table("price", 0.05 + 0.04 * np.sin(np.arange(8760) / 24)),
        GRID: _grid(),
    }


def _grid():
    """Return a grid of four cells, one of them without weather, as NetCDF."""
    rows = [daylight(45.0 + i, 8.0 + j, 200.0, np.datetime64("2021-06-20"), 3) for i in (0, 1) for j in (0, 1)]
    values = {name: np.array([row[name] for row in rows]).T.reshape(-1, 2, 2) for name in REQUIRED}
    for column in values.values():
        column[:, 1, 1] = np.nan
    axes = ("time", "lat", "lon")
    time = ("time", np.arange(72), {"units": "hours since 2021-06-20"})
    height = (("lat", "lon"), [[10.0, 20.0], [30.0, np.nan]])
    dataset = xr.Dataset(
        {name: (axes, column) for name, column in values.items()} | {"elevation": height},
        {"time": time, "lat": [45.0, 46.0], "lon": [8.0, 9.0]},
    )
    stream = io.BytesIO()
    dataset.to_netcdf(stream, engine="h5netcdf")
    return stream.getvalue()


# ------------------------------------------------------------------------------------------------------- weather

#: Column -> values of a believable hour, besides what the sun decides.
PLAUSIBLE = {
    "temp_air": (-30.0, 45.0),
    "relative_humidity": (5.0, 100.0),
    "temp_dew": (-35.0, 28.0),
    "wind_speed": (0.0, 25.0),
    "pressure": (60_000.0, 104_000.0),
    "precipitable_water": (0.1, 7.0),
    "aod500": (0.0, 1.5),
    "aod_broadband": (0.0, 1.0),
    "albedo": (0.0, 0.95),
    "snow_depth": (0.0, 150.0),
    "rain": (0.0, 30.0),
}
LIGHT = ("ghi", "dni", "dhi")


def daylight(latitude, longitude, elevation, start, days, interval_s=3600, clear=0.8, spread=False):
    """Return columns of a place's light that closes, for days in a row or (``spread``) one a month."""
    first = start.astype("datetime64[s]").astype(np.int64) - round(longitude / 15) * 3600
    day = np.arange(0, 86_400, interval_s)
    begins = first + 86_400 * (30 * np.arange(days) if spread else np.arange(days))
    time = (begins[:, None] + day).ravel()
    course = sun.course(time, interval_s, latitude, longitude, elevation)
    up = course.cos_zenith * course.lit
    beam = clear * 1000 * np.where(up > 0.02, 0.75 ** (1 / np.maximum(up, 0.05) ** 0.7), 0.0)
    sky = np.where(up > 0, 60 * up + (1 - clear) * 350 * up, 0.0)
    return {
        "time": time, "ghi": beam * up + sky, "dni": beam, "dhi": sky,
        "temp_air": np.full(len(time), 15.0), "wind_speed": np.full(len(time), 2.0),
    }  # fmt: skip


@dataclass(frozen=True)
class Drawn:
    """A weather file in both forms, and the place it is of."""

    plain: bytes
    mapped: bytes
    place: dict


@st.composite
def weather(draw, year=2021, days=3, least_light=True):
    """Return hours of any inhabited place, hazy or clear, with any of the columns, a few values missing."""
    latitude = draw(st.floats(-60, 60))
    longitude = draw(st.floats(-180, 180))
    elevation = draw(st.floats(-400, 4500))
    month = draw(st.sampled_from((4, 5, 6, 7, 8) if latitude > 0 else (1, 2, 10, 11, 12)))
    spread = days >= 12
    start = np.datetime64(f"{year}-01-05" if spread else f"{year}-{month:02d}-03")
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    interval_s = draw(st.sampled_from([3600, 3600, 1800]))
    rows = daylight(latitude, longitude, elevation, start, days, interval_s, draw(st.floats(0, 1)), spread)
    n = len(rows["time"])
    chosen = ["temp_air", "wind_speed", *draw(st.lists(st.sampled_from(sorted(set(PLAUSIBLE) - set(REQUIRED)))))]
    for name in dict.fromkeys(chosen):
        low, high = PLAUSIBLE[name]
        middle, width = draw(st.floats(low, high)), (high - low) * draw(st.sampled_from([0, 0.02, 0.3]))
        rows[name] = np.clip(middle + width * rng.standard_normal(n), low, high)
    if draw(st.booleans()):  # the weather of each hour its own
        cloud = rng.uniform(0, 1, n)
        shade = rows["dni"] * (1 - cloud)
        rows["ghi"] = rows["ghi"] - rows["dni"] * cloud * (rows["ghi"] - rows["dhi"]) / np.maximum(rows["dni"], 1e-9)
        rows["dni"] = shade
    cells = {name: [f"{value:.4f}" for value in rows[name]] for name in rows if name != "time"}
    for name in draw(st.lists(st.sampled_from(sorted(cells)), max_size=2)):
        cells[name][draw(st.integers(0, n - 1))] = ""
    local = rows["time"] + round(longitude / 15) * 3600
    stamps = [str(np.datetime64(int(moment), "s"))[:16] for moment in local]
    place = {"latitude_deg": latitude, "longitude_deg": longitude, "elevation_m": elevation}
    head = [*(f"# {key}: {value!r}" for key, value in place.items()), f"# utc_offset_h: {round(longitude / 15)}"]
    head += [f"# interval: {interval_s // 60} min", "# label: start"]

    def text(before, title):
        lines = zip(stamps, *cells.values(), strict=True)
        return "\n".join([*before, ",".join(["time", *title]), *(",".join(line) for line in lines)]).encode()

    absent = {
        name: [f"{sum(PLAUSIBLE[name]) / 2:g}"] * n for name in COLUMNS if name not in cells
    }  # a mapped table has every column
    plain = text(head, cells)
    cells |= absent
    return Drawn(plain, text([], [f"x_{name}" for name in cells]), place)


# ------------------------------------------------------------------------------- what the schema says, walked over


def number(low, high):
    """Return numbers of a range, its ends among them."""
    high = min(high, 1e9)
    whole = st.integers(math.ceil(low), math.floor(high)) if math.ceil(low) <= math.floor(high) else st.nothing()
    return st.floats(low, high, allow_subnormal=False) | whole | st.sampled_from([low, high])


def called(longest=200):
    """Return names: most of them short, since what is drawn for a study has an end, some as hostile as may be."""
    plain = st.text("abcXYZ019 -_.,é=+@$%&<>'\"/\\", min_size=1, max_size=min(8, longest)).filter(
        lambda text: text == text.strip() and text != "<<"
    )
    return st.one_of(plain, plain, plain, names().filter(lambda text: len(text) <= longest))


def _monthly(kind):
    one = number(kind.low, kind.high)
    return one | st.tuples(one, one).map(lambda two: [*two] * 6)


def _text(kind):
    if kind.pattern:
        return st.from_regex(rf"(?a:{kind.pattern})", fullmatch=True).filter(lambda text: len(text) <= kind.longest)
    return called(kind.longest)


#: Kind of value -> what it takes; the first that fits is used, so that special ones stand before what they are made of.
KINDS = (
    (mounting_schema.Surface, lambda kind, where: st.sampled_from([*surfaces(), FILES[where]])),
    (InputFile, lambda kind, where: st.just(FILES[where])),
    (mounting_schema.MountingKind, lambda kind, where: st.just(kind.own)),
    (fields.Monthly, lambda kind, where: _monthly(kind)),
    (fields.Number, lambda kind, where: number(kind.low, kind.high)),
    (fields.Whole, lambda kind, where: st.integers(kind.low, kind.high) | st.sampled_from([kind.low, kind.high])),
    (fields.Choice, lambda kind, where: st.sampled_from(kind.words)),
    (fields.Flag, lambda kind, where: st.booleans()),
    (library.EntryName, lambda kind, where: st.sampled_from(library.names())),
    (site_schema.Stamp, lambda kind, where: st.sampled_from(STAMPS)),
    (worth.Weight, lambda kind, where: number(0, 1e12)),
    (fields.Text, lambda kind, where: _text(kind)),
)
STAMPS = ("start", "end", "middle", "start UTC+1", "end UTC-03:30 +10 min", "UTC")


def _of_kind(kind, where):
    for known, make in KINDS:
        if isinstance(kind, known):
            return make(kind, where)
    raise TypeError(f"{where}: no strategy for a {type(kind).__name__}; add one")


def of(annotation, metadata, where):
    """Return a strategy for what a field's annotation takes."""
    if get_origin(annotation) is Annotated:
        inner, *more = get_args(annotation)
        return of(inner, (*more, *metadata), where)
    kinds = [each for each in metadata if isinstance(each, fields.Kind) and not isinstance(each, fields.Length)]
    if kinds:
        return _of_kind(kinds[0], where)
    origin, arguments = get_origin(annotation), get_args(annotation)
    if origin in (Union, UnionType):
        return st.one_of(*(of(each, (), where) for each in arguments if each is not NoneType))
    if origin is list:
        bound = next(each for each in metadata if isinstance(each, fields.Length))
        return st.lists(
            of(arguments[0], (), where), min_size=bound.least, max_size=min(bound.most, max(bound.least, MOST_ITEMS))
        )
    if origin is dict:
        return st.dictionaries(
            of(arguments[0], (), where), of(arguments[1], (), where), min_size=1, max_size=MOST_ITEMS
        )
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return section(annotation)
    raise TypeError(f"{where}: no strategy for {annotation}; add one")


def _where(model, name):
    """Return the section that declares a key, and the key."""
    home = next(each for each in reversed(model.__mro__) if name in getattr(each, "model_fields", {}))
    return f"{home.__name__}.{name}"


@cache
def _parts(model):
    parts = {
        name: of(info.annotation, tuple(info.metadata), _where(model, name))
        for name, info in model.model_fields.items()
    }
    needed = {name for name, info in model.model_fields.items() if info.is_required()}
    return {name: parts[name] for name in parts if name in needed}, {
        name: part for name, part in parts.items() if name not in needed
    }


@st.composite
def section(draw, model):
    """Return a section: what it must hold, any of the rest, and shaped by what keys ask of each other."""
    needed, free = _parts(model)
    data = draw(st.fixed_dictionaries(needed, optional=free))
    for shaped, shape in SHAPES.items():
        if issubclass(model, shaped):
            data = shape(draw, data)
    return data


def keys(model=schema.Study):
    """Return every (section, key) that a study may hold."""
    found, waiting = set(), [model]
    while waiting:
        here = waiting.pop()
        if all((here.__name__, name) in found for name in here.model_fields):
            continue
        for name, info in here.model_fields.items():
            found.add((here.__name__, name))
            waiting += _models(info.annotation)
    return found


def _models(annotation):
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [model for part in get_args(annotation) for model in _models(part)]


def keys_of(value):
    """Return every (section, key) that a validated study was given."""
    if isinstance(value, BaseModel):
        own = {(type(value).__name__, name) for name in value.model_fields_set}
        return own.union(*(keys_of(getattr(value, name)) for name in value.model_fields_set))
    if isinstance(value, dict | list | tuple):
        return set().union(*(keys_of(each) for each in (value.values() if isinstance(value, dict) else value)))
    return set()


# ----------------------------------------------------------------------------------- what keys ask of each other


def _without(data, *keys):
    return {name: value for name, value in data.items() if name not in keys}


def _rows_clear(draw, data):
    """Raise rows until they clear the ground, part them until they do not overlap."""
    width = data.get("row_width_m", 2.0)
    if "row_pitch_m" in data:
        data["row_pitch_m"] = max(data["row_pitch_m"], width)
    return data | {"height_m": max(data.get("height_m", 1.5), width / 2)}


def _range(draw, low, high, steps):
    first = draw(st.floats(low, high))
    last = draw(st.floats(first, high))
    return first, last, min(1.0, max(0.001, (last - first) / draw(st.integers(1, steps)) * 1.001))


def _sweep(draw, data):
    """Make a range that rises, of few gaps."""
    first, last, step = _range(draw, 0.4, 3.5, 6)
    return data | {"from_ev": first, "to_ev": last, "step_ev": step, **_qualities(data)}


def _pairs(draw, data):
    """Make every top gap the wider one."""
    split = draw(st.floats(0.6, 3.0))
    top, bottom = _range(draw, split + 0.01, 3.6, 2), _range(draw, 0.4, split, 2)
    if isinstance(data.get("terminals"), list):
        data["terminals"] = sorted(set(data["terminals"]))
    return data | {"top_ev": list(top), "bottom_ev": list(bottom), **_qualities(data)}


def _qualities(data):
    """Give the qualities of a list names that differ."""
    given = data.get("quality")
    if not isinstance(given, list):
        return {}
    words = [each for each in given if isinstance(each, str)][:1]
    return {"quality": words + [each | {"name": f"q {i}"} for i, each in enumerate(given) if isinstance(each, dict)]}


def _one_film(draw, data):
    """Name a material or a file of one."""
    if "name" in data and "absorption" in data:
        return _without(data, draw(st.sampled_from(["name", "absorption"])))
    return data if "name" in data or "absorption" in data else data | {"absorption": FILES["Material.absorption"]}


def _some_figure(draw, data):
    """Say something."""
    return data if set(data) - {"area"} else data | {"ff": 0.7}


def _junction(draw, data):
    """Say once where the response comes from and once how good it is."""
    quality = absorber_schema.Quality.QUALITY
    origins = [name for name in (*absorber_schema.Source.ORIGIN, "gap_ev") if name in data] or ["gap_ev"]
    origin = draw(st.sampled_from(origins))
    data = _without(data, *(name for name in absorber_schema.Source.ORIGIN if name != origin))
    if origin == "gap_ev":
        data = {"gap_ev": draw(st.floats(0.5, 3.0))} | data
    elif "gap_ev" in data:
        data["gap_ev"] = draw(st.floats(0.9, 1.4))
    data = _with_quality(draw, data, origin, quality)
    if "recombination_v" in data:  # the record asks for a field that holds
        data |= {
            "recombination_v": draw(st.sampled_from([0.0, 1e-6, 1e-3]) | st.floats(0.001, 0.2)),
            "built_in_v": draw(st.floats(0.9, 1.5)),
        }
    return data


def _with_quality(draw, data, origin, quality):
    if data.get("quality") == "ideal" and origin != "like":
        return _without(data, "datasheet", *quality)
    data = _without(data, "quality")
    if "datasheet" in data and (draw(st.integers(0, 3)) or {"like", "gap_ev"} <= set(data)):
        data = _without(data, "datasheet")  # solving takes longer than all else
    if "datasheet" in data:
        data = _without(data, *quality, *absorber_schema.Source.LIGHT)
        data["datasheet"] = _believable(draw, data["datasheet"], data)
        solved = absorber_schema.Datasheet(**data["datasheet"]).solved()
        if origin == "like" or "external_radiative_efficiency" in solved:
            return data
    if origin != "like":
        data.setdefault("external_radiative_efficiency", draw(st.floats(1e-8, 1)))
    return data


@cache
def _rated(name):
    """Return what a library entry's datasheet would say."""
    entry = library.entry(name).absorber
    standard = Ratings.standard((entry,))
    each = len(entry.junctions)
    return {
        "jsc_ma_cm2": float(standard.short_circuit[0]) / 10,
        "voc_v": float(standard.open_circuit[0]) / each,
        "ff": float(standard.fill_factor[0]),
        "efficiency": float(standard.efficiency[0]),
    }


def _believable(draw, sheet, data):
    """Bring the figures of a sheet near to what the junction can do: any are drawn, but few have a solution."""
    good = draw(st.floats(0.95, 0.999))
    if "like" in data and len(library.entry(data["like"]).absorber.junctions) == 1 and "gap_ev" not in data:
        near = {name: good * value for name, value in _rated(data["like"]).items()}
        drift = {"jsc_coefficient_per_k": 0.0004, "voc_coefficient_per_k": -0.0028, "power_coefficient_per_k": -0.0038}
        near |= drift if data["like"] == "c-si" else {}
        return _consistent({name: near[name] for name in sheet if name in near}, near) | {
            "area": sheet.get("area", "cell")
        }
    voltage = 0.55 * data.get("gap_ev", 1.0)
    normal = voltage / 0.0257
    limit = (normal - math.log(normal + 0.72)) / (normal + 1)  # Green (1982)
    near = {"voc_v": voltage, "ff": max(0.26, 0.75 * good * limit)}
    return _consistent({name: near[name] for name in sheet if name in near}, near)


def _consistent(sheet, near):
    """Say nothing twice; an efficiency needs a voltage or a fill factor beside it."""
    if "efficiency" in sheet:
        sheet = _without(sheet, "ff", "jsc_ma_cm2") | {"voc_v": near["voc_v"]}
    sheet = _without(sheet, "power_coefficient_per_k") if "voc_coefficient_per_k" in sheet else sheet
    return sheet if sheet else {"voc_v": near["voc_v"]}


def _absorber(draw, data):
    """Take a stack or a junction, and of a module what it has."""
    junction = (*_parts(absorber_schema.Source)[1], *_parts(absorber_schema.Source)[0])
    if "stack" in data:
        data = _without(data, *junction)
        gaps = sorted(draw(st.lists(st.floats(0.7, 2.2), min_size=len(data["stack"]), max_size=len(data["stack"]))))[
            ::-1
        ]
        single = [name for name in library.names() if len(library.entry(name).absorber.junctions) == 1]
        for layer, gap in zip(data["stack"], gaps, strict=True):
            layer["gap_ev"] = gap
            if "like" in layer:
                layer["like"] = draw(st.sampled_from(single))
        return data
    if "like" in data and len(library.entry(data["like"]).absorber.junctions) > 1:
        return _without(data, *(name for name in junction if name != "like"))
    return _without(data, "terminals", "coupling")


def _layer(draw, data):
    if "datasheet" in data:
        data["datasheet"] = data["datasheet"] | {"area": "cell"}
    return data


def _swept(draw, data):
    if "recombination_v" in data:
        data |= {
            "recombination_v": draw(st.sampled_from([0.0, 1e-6, 1e-3]) | st.floats(0.001, 0.2)),
            "built_in_v": draw(st.floats(0.9, 1.5)),
        }
    if "like" in data:
        single = [name for name in library.names() if len(library.entry(name).absorber.junctions) == 1]
        return _without(data, "collected") | {"like": draw(st.sampled_from(single))}
    return {"external_radiative_efficiency": draw(st.floats(1e-8, 1))} | data


def _plant(draw, data):
    """Name one size, the one that limits, and a price."""
    size = {"area": "area_m2", "dc_power": "dc_power_kw", "grid_power": "grid_power_kw"}
    needed = size[data.get("limited_by", "dc_power")]
    data = _without(data, *(name for name in size.values() if name != needed))
    data.setdefault(needed, draw(st.floats(1, 1e5)))
    if {"module_price_per_w", "module_price_per_m2"} <= set(data):
        data = _without(data, draw(st.sampled_from(["module_price_per_w", "module_price_per_m2"])))
    return data if {"module_price_per_w", "module_price_per_m2"} & set(data) else data | {"module_price_per_w": 0.2}


def _columns(draw, data):
    """Name the columns of the mapped table, in our units."""
    needed = {name: f"x_{name}" for name in REQUIRED}
    given = {name: {"column": f"x_{name}", "unit": COLUMNS[name][0]} for name in data if name in COLUMNS}
    rest = {"time": draw(st.sampled_from(["time", ["time"]]))}
    if "time_format" in data:
        rest["time_format"] = "%Y-%m-%dT%H:%M"
    if "missing" in data:
        rest["missing"] = data["missing"]
    return needed | given | rest


#: Section -> what brings drawn keys into agreement; of a section with a base, the base's goes first.
SHAPES = {
    mounting_schema._InRows: _rows_clear,
    schema.GapSweep: _sweep,
    schema.GapPairs: _pairs,
    absorber_schema.Material: _one_film,
    absorber_schema.Datasheet: _some_figure,
    absorber_schema.Source: _junction,
    absorber_schema.Layer: _layer,
    absorber_schema.Absorber: _absorber,
    absorber_schema.SweepQuality: _swept,
    worth.Worth: _plant,
    site_schema.Columns: _columns,
}


# ------------------------------------------------------------------------------------------------- whole studies


@st.composite
def studies(draw, days=3, by_the_hundred=True, most_draws=60):
    """Return a valid study with its files; weather of three days, or of a day of each month (``days=12``)."""
    data = draw(section(schema.Study))
    skies = [draw(weather(2020 + i, days)) for i in range(draw(st.integers(1, 2)))]
    files = {f"w{i}.csv": sky.plain for i, sky in enumerate(skies)}
    files |= {f"m{i}.csv": sky.mapped for i, sky in enumerate(skies)}
    _rename(draw, data)
    planes = _shared_mounting(draw, data)
    data["sites"] = [_site(draw, site, skies, planes) for site in data["sites"][: draw(st.integers(1, 2))]]
    if by_the_hundred and draw(st.integers(0, 5)) == 0:
        data["sites"], more = draw(_many(data["sites"]))
        files |= more
        data.pop("portfolio", None)
    _refer(draw, data)
    if "chance" in data:
        data["chance"] |= {"draws": draw(st.integers(chance_schema.LEAST_DRAWS, most_draws))}
    return Kit(data, files)


def _different(count):
    return st.lists(called(), min_size=count, max_size=count, unique_by=fields.folded).filter(
        lambda found: not {fields.folded(name) for name in found} & set(RESERVED)
    )


def _rename(draw, data):
    """Give sites and absorbers names that differ."""
    for part in ("sites", "absorbers"):
        many_of = len(data[part])
        for each, name in zip(data[part], draw(_different(many_of)), strict=True):
            each["name"] = name


def _shared_mounting(draw, data):
    """Make a mounting for all where there is none; return the names a site may choose from."""
    if "mounting" not in data:
        data["mounting"] = {"tilt_deg": 30, "azimuth_deg": 180}
    shared = data["mounting"]
    if "kind" in shared or not all(isinstance(each, dict) for each in shared.values()):
        return [shared.get("kind", "fixed")]
    data["mounting"] = _apart(shared)
    return list(data["mounting"])


def _apart(named):
    """Leave out names that differ by case alone."""
    first = {fields.folded(name): name for name in reversed(named)}
    return {name: named[name] for name in named if first[fields.folded(name)] == name}


def _site(draw, site, skies, planes):
    """Give a site weather of its own, and what agrees with it."""
    number_of = draw(st.integers(0, len(skies) - 1))
    sky = skies[number_of]
    where = {name: value for name, value in sky.place.items() if name in site or "columns" in site}
    site = _without(site, "cell", "format", *sky.place) | where | {"weather": f"w{number_of}.csv", "allow_gaps": True}
    if "columns" in site:
        site = site | {"weather": f"m{number_of}.csv"}
    elif len(skies) > 1 and draw(st.integers(0, 4)) == 0:
        site["weather"] = ["w0.csv", "w1.csv"]
    elif draw(st.integers(0, 8)) == 0:
        site |= {"weather": GRID, "cell": draw(st.sampled_from([[0, 0], [0, 1], [1, 1], [7, 7]]))}
        site = _without(site, *sky.place)
    else:
        site |= {"format": "plain"} if draw(st.booleans()) else {}
    if draw(st.integers(0, 3)):
        site = _without(site, "timestamps")
    mounting = site.get("mounting")
    if isinstance(mounting, str | list):
        site["mounting"] = draw(st.sampled_from([planes[0], planes[-1:], planes]))
    elif isinstance(mounting, dict) and all(isinstance(each, dict) for each in mounting.values()):
        site["mounting"] = _apart(mounting)
    return site


def _refer(draw, data):
    """Let names elsewhere be those of sites and absorbers."""
    absorbers = [each["name"] for each in data["absorbers"]]
    sites = [each["name"] for each in data["sites"]] if isinstance(data["sites"], list) else []
    if "reference" in data:
        data["reference"] = draw(st.sampled_from(absorbers))
    if "portfolio" in data:
        data["portfolio"] = dict(zip(sites, [1.0, *data["portfolio"].values()], strict=False))
    chance = data.get("chance", {})
    for part, known in (("sites", sites), ("absorbers", absorbers)):
        if part in chance:
            chance[part] = dict(zip(known, chance[part].values(), strict=False))
    for key in ("module_price_per_w", "module_price_per_m2", "degradation_per_year"):
        given = data.get("worth", {}).get(key)
        if isinstance(given, dict):
            data["worth"][key] = dict.fromkeys(absorbers, next(iter(given.values())))


@st.composite
def _many(draw, sites):
    """Return sites by table, by grid, or by a table that finds its cells in a grid; and the table."""
    form = draw(st.sampled_from(["table", "grid", "both"]))
    shared = {name: sites[0][name] for name in many.SHARED if name in sites[0] and name not in ("format", "mounting")}
    shared |= {"allow_gaps": True}
    if form == "grid":
        return {"grid": GRID} | _without(shared, "timestamps"), {}
    rows = []
    for i, site in enumerate(sites):
        row = {"name": site["name"].replace('"', "'"), "allow_gaps": "true"}
        if form == "both":
            row |= {"latitude_deg": draw(st.floats(44.6, 46.4)), "longitude_deg": draw(st.floats(7.6, 9.4))}
        else:
            row |= {name: site[name] for name in many.NUMBERS if name in site} | {"weather": f"w{i % 1}.csv"}
            row |= {name: draw(st.floats(0.1, 0.4)) for name in draw(st.lists(st.sampled_from(many.AIR)))}
        rows.append(row)
    head = list(dict.fromkeys(name for row in rows for name in row))
    lines = [",".join(head), *(",".join(f'"{row.get(name, "")}"' for name in head) for row in rows)]
    text = "\n".join(lines).encode("utf-8", "replace")
    return {"table": TABLE} | ({"grid": GRID} if form == "both" else {}) | shared, {TABLE: text}


# ------------------------------------------------------------------------------------------------- broken studies

HOSTILE = (
    None, True, -1, 0, 1e308, -1e308, 1e-320, float("nan"), float("inf"), 10**400, "", " ", "x" * 100_000, "../../x",
    "/etc/passwd", "/dev/zero", "CON", "a\0b", "\x1b[31m", "\u202ex", "=1+1", "<script>", "$\\frac$", "yes", "1e3",
    [], {}, [[]], [{}], {"": ""}, {"a": {"b": {"c": []}}}, [0] * 13, ["w0.csv"] * 60, "pvlib:../x", "w0.csv", GRID,
    "eqe.csv", "study.yaml", 2**63, "\U0001f600", "%Y" * 20, "%", "UTC+15",
)  # fmt: skip


def _places(data, path=()):
    yield path
    for key, value in data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ():
        yield from _places(value, (*path, key))


def _at(data, path):
    for part in path:
        data = data[part]
    return data


@st.composite
def broken(draw):
    """Return a study with anything wrong anywhere: values, keys, files, weather, or the text itself."""
    kit = draw(studies())
    kind = draw(st.sampled_from(["data", "data", "weather", "file", "text", "loose"]))
    if kind == "loose":  # any keys beside each other, each of its kind and range
        needed, free = _parts(draw(st.sampled_from([absorber_schema.Absorber, site_schema.Site, worth.Worth])))
        one = draw(st.fixed_dictionaries(needed, optional=free))
        place = ("worth",) if "discount_rate" in one else ("sites", 0) if "weather" in one else ("absorbers", 0)
        if place[0] == "worth" or isinstance(kit.data[place[0]], list):
            _at(kit.data, place[:-1])[place[-1]] = one
    elif kind == "data":
        for _ in range(draw(st.integers(1, 4))):
            _spoil(draw, kit.data)
    elif kind in ("weather", "file"):
        chosen = [name for name in {**fixed_files(), **kit.files} if name.startswith(("w", "m")) == (kind == "weather")]
        name = draw(st.sampled_from(sorted(chosen)))
        kit.files[name] = draw(damaged({**fixed_files(), **kit.files}[name]))
    else:
        kit.text = draw(damaged(json.dumps(kit.data, indent=1).encode()))
    return kit


def _spoil(draw, data):
    places = [path for path in _places(data) if path]
    if not places:
        return
    path = draw(st.sampled_from(places))
    parent, key = _at(data, path[:-1]), path[-1]
    how = draw(st.sampled_from(["put", "put", "lose", "twice", "swap", "name"]))
    if how == "put":
        parent[key] = draw(st.sampled_from(HOSTILE))
    elif how == "lose":
        del parent[key]
    elif how == "twice" and isinstance(parent, list):
        parent.append(parent[key])
    elif how == "swap":
        parent[key] = json.loads(json.dumps(_at(data, draw(st.sampled_from(places)))))
    elif isinstance(parent, dict):
        parent[draw(st.sampled_from(["", "kind", "name", "like", "<<", "é", "\x1b[2J", "tilt", "0"]))] = parent.pop(key)
