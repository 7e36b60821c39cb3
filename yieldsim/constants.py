"""Physical constants, each once, with unit, source and year."""

# The four below are exact by definition: SI Brochure, 9th edition, BIPM 2019.
PLANCK = 6.62607015e-34  # J s
LIGHT_SPEED = 299792458.0  # m s-1
ELEMENTARY_CHARGE = 1.602176634e-19  # C
BOLTZMANN = 1.380649e-23  # J K-1

PHOTON_EV_NM = PLANCK * LIGHT_SPEED / ELEMENTARY_CHARGE * 1e9  # eV nm: photon energy times wavelength
THERMAL_EV_PER_K = BOLTZMANN / ELEMENTARY_CHARGE  # eV K-1
CELSIUS_ZERO = 273.15  # K, ITS-90 definition of the Celsius scale

STANDARD_IRRADIANCE = 1000.0  # W m-2, standard test conditions, IEC 60904-3
STANDARD_CELL_TEMPERATURE = 298.15  # K, 25 degC, standard test conditions, IEC 60904-3
