"""The defining constants of the SI that the formulas use; all exact.

References
----------
BIPM, *The International System of Units* (SI Brochure), 9th edition, 2019, table 1.
"""

__all__ = ["BOLTZMANN_J_K", "ELEMENTARY_CHARGE_C", "PLANCK_J_S", "SPEED_OF_LIGHT_M_S"]

SPEED_OF_LIGHT_M_S = 299792458.0
PLANCK_J_S = 6.62607015e-34
ELEMENTARY_CHARGE_C = 1.602176634e-19
BOLTZMANN_J_K = 1.380649e-23
