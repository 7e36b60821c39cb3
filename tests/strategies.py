"""Hypothesis strategies, all in one place."""

from hypothesis import strategies as st

from yieldsim.constants import CELSIUS_ZERO, THERMAL_EV_PER_K
from yieldsim.device.balance import radiative_current, saturation_current
from yieldsim.device.diode import Diode
from yieldsim.device.response import step


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
