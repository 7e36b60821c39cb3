"""Hypothesis strategies, all in one place."""

import numpy as np
from hypothesis import strategies as st

from yieldsim.config.crosscheck import RESERVED
from yieldsim.config.fields import folded
from yieldsim.constants import CELSIUS_ZERO, THERMAL_EV_PER_K
from yieldsim.device.balance import radiative_current, saturation_current
from yieldsim.device.diode import Diode
from yieldsim.device.response import step
from yieldsim.device.series import Link
from yieldsim.sky.rows import Rows


@st.composite
def diodes(draw):
    """Return a diode of a sane junction in light of 0.01 to 1500 W/m2 at -40 to 100 degC."""
    temperature = draw(st.floats(-40, 100)) + CELSIUS_ZERO
    gap = draw(st.floats(0.65, 2.3))
    ideality = draw(st.floats(1.0, 2.0))
    light = 10 ** draw(st.floats(-2, 3.176))
    response = step(gap)
    radiative = radiative_current(response.wavelength_nm, response.quantum_efficiency, temperature)
    collected = 600 - 230 * (gap - 0.65)  # A/m2 at 1000 W/m2, about what a gap collects
    recombines = draw(st.booleans())
    return Diode(
        photocurrent=collected * light / 1000,
        saturation_current=saturation_current(radiative, collected, 10 ** draw(st.floats(-5, 0)), ideality),
        thermal_voltage=ideality * THERMAL_EV_PER_K * temperature,
        series_resistance=draw(st.sampled_from([0.0, 1e-6, 1e-4, 5e-4])),
        shunt_conductance=draw(st.sampled_from([0.0, 0.01, 1.0, 50.0])),
        recombination_voltage=draw(st.floats(0.01, 0.1)) if recombines else 0.0,
        built_in_voltage=draw(st.floats(0.9, 1.4)) if recombines else float("inf"),
    )


# --------------------------------------------------------------------------------------------------- rows


@st.composite
def row_scenes(draw):
    """Return rows that stand free of each other and of the ground, their rotation [rad], and the sun's slope across."""
    width = draw(st.floats(0.5, 5.0))
    rotation = draw(st.floats(-1.5707, 1.5707))
    height = width / 2 * abs(np.sin(rotation)) + draw(st.floats(0.05, 5.0))
    pitch = draw(st.none() | st.floats(1.001, 8.0).map(lambda times: times * width))
    return Rows(width, height, pitch), rotation, draw(st.floats(-30.0, 30.0))


# ------------------------------------------------------------------------------------------------- studies

STATIONS = ("pvlib:723170TYA.CSV", "pvlib:703165TY.csv")


def _number(low, high):
    return st.floats(low, high, allow_nan=False) | st.integers(int(-(-low // 1)), int(high // 1))


def _monthly(low, high):
    return st.floats(low, high) | st.lists(st.floats(low, high), min_size=12, max_size=12)


def names():
    """Return names as hostile as a study may hold: any printable text of up to 200 characters."""
    unprintable = ("Cc", "Cs", "Cn", "Zl", "Zp")
    text = st.text(st.characters(exclude_categories=unprintable), min_size=1, max_size=200)
    return text.filter(lambda name: name == name.strip())


def _unique_names(least, most):
    return st.lists(names(), min_size=least, max_size=most, unique_by=folded).filter(
        lambda found: not any(folded(name) in RESERVED for name in found)
    )


def planes():
    """Return one fixed plane as a study holds it."""
    return st.fixed_dictionaries(
        {"tilt_deg": _number(0, 90), "azimuth_deg": _number(0, 360)}, optional={"kind": st.just("fixed")}
    )


def mountings():
    """Return one mounting of any kind as a study holds it."""
    azimuth = _number(0, 360)
    model = {"sky_model": st.sampled_from(["hay-davies", "perez", "radiance"])}
    # At the least height given here the widest row clears the ground at any tilt.
    rows = model | {"row_pitch_m": _number(3, 50), "row_width_m": _number(0.5, 3), "height_m": _number(1.5, 20)}
    turning = {
        "axis_azimuth_deg": azimuth,
        "axis_tilt_deg": _number(0, 45),
        "max_angle_deg": _number(0, 90),
        "backtrack": st.booleans(),
    }
    tilted = {"tilt_deg": _number(0, 90), "azimuth_deg": azimuth}
    return st.one_of(
        st.fixed_dictionaries(tilted, optional={"kind": st.just("fixed")} | rows),
        st.fixed_dictionaries({"kind": st.just("tracker")}, optional=turning | rows),
        st.fixed_dictionaries({"kind": st.just("vertical"), "azimuth_deg": azimuth}, optional=rows),
        st.fixed_dictionaries({"kind": st.just("roof")} | tilted, optional=model),
    )


def _grounds():
    albedo = st.fixed_dictionaries({}, optional={"albedo": st.floats(0, 1)})
    surface = st.sampled_from(["grass", "dry-soil", "fresh-snow"])
    return surface | albedo | st.fixed_dictionaries({"surface": surface}, optional={"albedo": st.floats(0, 1)})


def _atmospheres():
    return st.fixed_dictionaries(
        {},
        optional={
            "aod500": _monthly(0, 5),
            "angstrom_exponent": _monthly(-0.5, 3),
            "water_cm": _monthly(0, 12),
            "ozone_atm_cm": _monthly(0.05, 0.7),
            "haze": st.sampled_from(["hourly", "fixed"]),
        },
    )


_QUALITY = {
    "ideality": st.floats(1, 3),
    "series_resistance_ohm_cm2": st.floats(0, 100),
    "shunt_resistance_ohm_cm2": st.floats(1, 1e6),
}
_MODULE = {
    "bifaciality": st.floats(0, 1),
    "incidence_modifier": st.floats(0.05, 0.5) | st.just("none"),
    "area_fraction": st.floats(0.1, 1),
    "heat_loss": st.fixed_dictionaries({"constant_w_m2_k": st.floats(5, 100), "wind_w_s_m3_k": st.floats(0, 30)}),
    "gap_shift_ev_per_k": st.floats(-1e-3, 1e-3),
}


def _absorbers(name):
    like = st.sampled_from(["c-si", "cdte", "cigs", "gaas", "perovskite-1.55"])
    efficiency = st.floats(1e-8, 1)
    gap = st.floats(0.6, 2.5)
    given = {"name": st.just(name)}
    layer = {"external_radiative_efficiency": efficiency}
    stack = st.tuples(
        st.fixed_dictionaries({**layer, "gap_ev": st.floats(1.5, 2.0)}, optional={"transmits": st.floats(0, 0.9)}),
        st.fixed_dictionaries({"like": st.sampled_from(["c-si", "cigs"])}, optional=_QUALITY),
    ).map(list)
    coupled = {"terminals": st.sampled_from([2, 4]), "coupling": st.floats(0, 1)}
    module = {key: value for key, value in _MODULE.items() if key != "gap_shift_ev_per_k"}
    return st.one_of(
        st.fixed_dictionaries({**given, "stack": stack}, optional={**coupled, **module}),
        st.fixed_dictionaries({**given, "like": like}, optional={**_QUALITY, **_MODULE}),
        st.fixed_dictionaries({**given, "gap_ev": gap, "quality": st.just("ideal")}, optional=_MODULE),
        st.fixed_dictionaries(
            {**given, "gap_ev": gap, "external_radiative_efficiency": efficiency}, optional={**_QUALITY, **_MODULE}
        ),
    )


def _sweeps():
    quality = st.one_of(
        st.just("ideal"),
        st.fixed_dictionaries({"like": st.sampled_from(["c-si", "gaas"])}, optional=_QUALITY),
        st.fixed_dictionaries({"external_radiative_efficiency": st.floats(1e-8, 1), "collected": st.floats(0.1, 1)}),
    )
    return st.fixed_dictionaries(
        {"from_ev": st.floats(0.9, 1.1), "to_ev": st.floats(1.2, 1.6), "step_ev": st.floats(0.1, 1)},
        optional={"quality": quality},
    )


@st.composite
def studies(draw):
    """Return a valid study as plain data: any names, weather that pvlib ships."""
    sites = [
        draw(
            st.fixed_dictionaries(
                {"name": st.just(name), "weather": st.sampled_from(STATIONS)},
                optional={
                    "mounting": mountings(),
                    "atmosphere": _atmospheres(),
                    "ground": _grounds(),
                    "latitude_deg": _number(-90, 90),
                    "longitude_deg": _number(-180, 180),
                    "elevation_m": _number(-450, 9000),
                    "timestamps": st.sampled_from(["start", "end", "middle UTC+1"]),
                    "allow_gaps": st.booleans(),
                },
            )
        )
        for name in draw(_unique_names(1, 3))
    ]
    absorbers = [draw(_absorbers(name)) for name in draw(_unique_names(1, 4))]
    study = {
        "study": draw(st.from_regex(r"[A-Za-z0-9](?:[a-z \-]{0,20}[a-z0-9])?", fullmatch=True)),
        "mounting": draw(planes()),
        "sites": sites,
        "absorbers": absorbers,
    }
    optional = {
        "reference": st.sampled_from([absorber["name"] for absorber in absorbers]),
        "losses": st.dictionaries(
            st.sampled_from(["soiling", "snow", "wiring", "inverter", "availability"]), _monthly(0, 0.9)
        ),
        "gap_sweep": _sweeps(),
        "gap_pairs": st.fixed_dictionaries(
            {
                "top_ev": st.tuples(st.floats(1.5, 1.6), st.floats(1.7, 1.8), st.floats(0.1, 1)).map(list),
                "bottom_ev": st.tuples(st.floats(0.9, 1.0), st.floats(1.1, 1.2), st.floats(0.1, 1)).map(list),
            },
            optional={"terminals": st.sampled_from([2, 4, [2], [2, 4]]), "quality": st.just("ideal")},
        ),
        "keep": st.lists(st.sampled_from(["annual", "monthly", "plots"]), min_size=1, max_size=3, unique=True),
    }
    return study | draw(st.fixed_dictionaries({}, optional=optional))


#: What can be wrong: key path in the study, what to put there (None = take the key away), key path the message names.
DAMAGES = (
    (("study",), None, "study"),
    (("study",), "../elsewhere", "study"),
    (("study",), "a\nb", "study"),
    (("sites",), [], "sites"),
    (("sites",), {"table": "sites.csv"}, "sites"),
    (("sites", 0, "name"), "", "sites[0].name"),
    (("sites", 0, "weather"), "no/such/file.csv", "sites[0].weather"),
    (("sites", 0, "weather"), "pvlib:no such file.csv", "sites[0].weather"),
    (("sites", 0, "weather"), 7, "sites[0].weather"),
    (("sites", 0, "wether"), "a.csv", "sites[0].wether"),
    (("sites", 0, "latitude_deg"), 91, "sites[0].latitude_deg"),
    (("sites", 0, "longitude_deg"), "2.3 E", "sites[0].longitude_deg"),
    (("sites", 0, "elevation_m"), float("nan"), "sites[0].elevation_m"),
    (("sites", 0, "allow_gaps"), 1, "sites[0].allow_gaps"),
    (("sites", 0, "mounting"), "not a mounting", "sites[0].mounting"),
    (("sites", 0, "atmosphere"), {"aod500": [0.1] * 11}, "sites[0].atmosphere.aod500"),
    (("mounting", "tilt_deg"), 200, "mounting.tilt_deg"),
    (("mounting", "tilt_deg"), None, "mounting.tilt_deg"),
    (("mounting", "azimuth_deg"), float("inf"), "mounting.azimuth_deg"),
    (("mounting", "kind"), "flying", "mounting.kind"),
    (("absorbers",), [], "absorbers"),
    (("absorbers", 0, "gap_ev"), -1, "absorbers[0].gap_ev"),
    (("absorbers", 0, "like"), "unobtainium", "absorbers[0].like"),
    (("absorbers", 0, "bifaciality"), 1.5, "absorbers[0].bifaciality"),
    (("absorbers", 0, "external_radiative_efficiency"), 0, "absorbers[0].external_radiative_efficiency"),
    (("reference",), "nobody of this name", "reference"),
    (("losses",), {"soiling": 2}, "losses.soiling"),
    (("losses",), {"dust": 0.1}, "losses.dust"),
    (("gap_sweep",), {"from_ev": 2, "to_ev": 1, "step_ev": 0.1}, "gap_sweep"),
    (("gap_sweep",), {"from_ev": 1, "to_ev": 2, "step_ev": 0}, "gap_sweep.step_ev"),
    (("gap_pairs",), {"top_ev": [1.5, 1.6, 0.1], "bottom_ev": [0.9, 1.0]}, "gap_pairs.bottom_ev"),
    (("keep",), ["everything"], "keep[0]"),
    (("chance",), {"draws": 10}, "chance.draws"),
)


@st.composite
def broken_studies(draw, most=3):
    """Return a study with one to three things wrong, and the key paths that the messages must name."""
    study = draw(studies())
    damages = draw(st.lists(st.sampled_from(DAMAGES), min_size=1, max_size=most, unique_by=lambda damage: damage[0][0]))
    for path, value, _ in damages:
        place = study
        for part in path[:-1]:
            place = place[part]
        if value is None:
            del place[path[-1]]
        else:
            place[path[-1]] = value
    return study, [named for _, _, named in damages]


@st.composite
def stacks(draw):
    """Return two or three diodes under the same sky, top first, with (links) or without coupling; as `series.Link`."""
    temperature = draw(st.floats(-30, 90)) + CELSIUS_ZERO
    thermal = THERMAL_EV_PER_K * temperature
    light = 10 ** draw(st.floats(-1, 3.0))
    gaps = sorted(draw(st.lists(st.floats(0.66, 2.1), min_size=2, max_size=3)), reverse=True)
    coupling = draw(st.sampled_from([0.0, 0.5, 1.0]))
    links = []
    for gap in gaps:
        response = step(gap)
        radiative = radiative_current(response.wavelength_nm, response.quantum_efficiency, temperature)
        diode = Diode(
            photocurrent=0.2 * light * draw(st.floats(0.5, 1.5)),
            saturation_current=saturation_current(radiative, 200.0, 10 ** draw(st.floats(-4, 0)), 1.0),
            thermal_voltage=thermal,
            series_resistance=draw(st.sampled_from([0.0, 1e-5, 2e-4])),
            shunt_conductance=draw(st.sampled_from([0.0, 0.01, 1.0, 20.0])),
        )
        links.append(Link(diode, coupling * radiative, thermal))
    return links


# ------------------------------------------------------------------------------------------------- weather files

_NASTY = (
    b"nan", b"inf", b"-inf", b"1e999", b"1e300", b"-1e300", b"9" * 400, b"-9999", b"1_0", b"\xd9\xa3", b"", b" ", b'"',
    b'"""', b",", b";", b"\t", b"\r", b"\n", b"\n\n", b"\x00", b"\xff\xfe", b"0x10", b"--", b"24:00", b"29", b"0000",
)  # fmt: skip


@st.composite
def damaged(draw, content):
    """Return a file with up to three faults: bytes changed or put in, nasty cells, lines lost, repeated, swapped."""
    for _ in range(draw(st.integers(1, 3))):
        kind = draw(st.sampled_from(["cell", "bytes", "lost", "again", "swapped", "cut", "put in"]))
        if kind in ("lost", "again", "swapped"):
            lines = content.split(b"\n")
            i, j = (draw(st.integers(0, len(lines) - 1)) for _ in range(2))
            if kind == "lost":
                lines[i : i + draw(st.integers(1, 3))] = []
            elif kind == "again":
                lines.insert(j, lines[i])
            else:
                lines[i], lines[j] = lines[j], lines[i]
            content = b"\n".join(lines)
        elif kind == "cell":
            delimiter = draw(st.sampled_from([b",", b" ", b":", b"\n"]))
            cells = content.split(delimiter)
            # Half of the faults are in the header, where few bytes are.
            most = len(cells) - 1 if draw(st.booleans()) else min(len(cells) - 1, 60)
            cells[draw(st.integers(0, most))] = draw(st.sampled_from(_NASTY))
            content = delimiter.join(cells)
        else:
            at = draw(st.integers(0, len(content)))
            junk = draw(st.binary(max_size=40))
            rest = {"bytes": content[at + len(junk) :], "cut": b"", "put in": content[at:]}[kind]
            content = content[:at] + junk + rest
    return content
