"""Physical constants and how device data follow temperature."""

from __future__ import annotations

from collections.abc import Mapping

from kickrender.circuit import exact

BOLTZMANN_J_PER_K = 1.380649e-23  # SI 2019, exact
ELEMENTARY_CHARGE_C = 1.602176634e-19  # SI 2019, exact
REFERENCE_TEMPERATURE_K = 298.15  # 25 C, at which device data are given
DEFAULT_BAND_GAP_V = 1.11  # silicon
MINIMUM_CONDUCTANCE_S = 1e-12  # across every junction, so that no net floats when all junctions are off


def thermal_voltage(temperature_k: float) -> float:
    """kT/q. [V]"""
    return BOLTZMANN_J_PER_K * temperature_k / ELEMENTARY_CHARGE_C


def saturation_current(model: Mapping[str, float], temperature_k: float, key: str = "saturation_current") -> float:
    """I_s(T) = I_s (T/T0)^(3/n) exp((T/T0 - 1) E_g/(n V_T)). [A]

    `key` names another saturation current of the model; absent, it is the forward one. Computed by correctly
    rounded functions, since the result moves every sample.
    """
    i_s = model.get(key, model["saturation_current"])
    if temperature_k == REFERENCE_TEMPERATURE_K or i_s == 0.0:
        return i_s
    ratio = temperature_k / REFERENCE_TEMPERATURE_K
    ideality = model["ideality"]
    band_gap = model.get("band_gap", DEFAULT_BAND_GAP_V)
    growth = exact.exp((ratio - 1.0) * band_gap / (ideality * thermal_voltage(temperature_k)))
    return i_s * exact.power(ratio, 3.0 / ideality) * growth
