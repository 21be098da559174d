"""What a user would write instead: twelve columns for a CSV catalogue.

    python3 script.py IN.csv OUT.csv

The comoving distance and the lookback time are integrated cumulatively on a
grid of redshifts and interpolated by cubic splines; the rest follows from them.
"""

import sys

import numpy as np
import pandas as pd
from scipy.integrate import cumulative_trapezoid
from scipy.interpolate import CubicSpline

C = 299792.458  # km/s
H0 = 67.66  # km/s/Mpc
OMEGA_M = 0.3111
GYR = 977.792221  # Mpc/(km/s)

catalogue = pd.read_csv(sys.argv[1])
z = catalogue["z_best"].to_numpy()


def hubble(z):
    return H0 * np.sqrt(OMEGA_M * (1 + z) ** 3 + 1 - OMEGA_M)


grid = np.linspace(0, z.max() * 1.001, 20001)
distance = CubicSpline(grid, cumulative_trapezoid(C / hubble(grid), grid, initial=0))
lookback = CubicSpline(grid, cumulative_trapezoid(GYR / (1 + grid) / hubble(grid), grid, initial=0))
age_now = 2 / 3 / np.sqrt(1 - OMEGA_M) * np.arcsinh(np.sqrt((1 - OMEGA_M) / OMEGA_M)) * GYR / H0

comoving = distance(z)
angular = comoving / (1 + z)
luminosity = comoving * (1 + z)
catalogue["comoving_distance"] = comoving
catalogue["transverse_comoving_distance"] = comoving
catalogue["angular_diameter_distance"] = angular
catalogue["luminosity_distance"] = luminosity
with np.errstate(divide="ignore"):
    catalogue["distance_modulus"] = 5 * np.log10(luminosity) + 25
catalogue["angular_scale"] = angular * 1000 * np.pi / 180 / 3600
catalogue["lookback_time"] = lookback(z)
catalogue["age_at_emission"] = age_now - lookback(z)
catalogue["comoving_volume"] = 4 / 3 * np.pi * comoving**3
catalogue["comoving_volume_element"] = C / hubble(z) * comoving**2
catalogue["recession_velocity_now"] = H0 * comoving
catalogue["recession_velocity_at_emission"] = hubble(z) * angular
catalogue.to_csv(sys.argv[2], index=False)
