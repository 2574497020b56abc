"""The release, a limit, physical constants (SI 2019, exact) and the reference temperature."""

VERSION = "0.1.0"
"""The release; the build reads it here."""

BOARDS = 2**15
"""Boards sampled unless the caller says otherwise."""

MOST_BOARDS = 2**22
"""About 2 GB of samples; more boards tell nothing more."""

BOLTZMANN = 1.380649e-23
"""k [J/K], exact since the SI of 2019."""

ELEMENTARY_CHARGE = 1.602176634e-19
"""q [C], exact since the SI of 2019."""

KELVIN_OFFSET = 273.15
"""0 °C in K."""

REFERENCE_TEMPERATURE = 25.0 + KELVIN_OFFSET
"""T0 [K]: the temperature at which data sheets state their figures."""

BAND_GAP = 1.11
"""E_g [V] of silicon near room temperature (memory)."""

SATURATION_EXPONENT = 3.0
"""γ, the temperature exponent of I_S (memory)."""

HOTTEST_JUNCTION = 250.0 + KELVIN_OFFSET
"""[K] A junction with no stable point below this is in thermal runaway."""

ASSUMED_SATURATION_VOLTAGE = 0.2
"""V_CE(sat) [V] where the stage file states none (common practice: about 0.2 V)."""

DEFAULT_EMITTER_VOLTAGE = 1.0
"""[V] across the emitter resistor where the target leaves it out (the 1 V rule, common practice)."""

HAND_BASE_EMITTER_VOLTAGE = 0.7
"""V_BE [V] of a hand calculation (common practice)."""
