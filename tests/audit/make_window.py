#!/usr/bin/env python3
"""Writes window_times.csv and window_power.csv: the Lomb-Scargle power of a sampling itself.

Run with astropy, numpy and scipy from PyPI; the versions used stand in the first line of
window_power.csv. Times are invented: one site, gaps by day, by season and at random.
"""

import pathlib

import astropy
import numpy as np
import scipy
import scipy.signal
from astropy.timeseries import LombScargle

HERE = pathlib.Path(__file__).parent

rng = np.random.default_rng(20260101)
night = np.arange(1200)
in_season = np.cos(2 * np.pi * (night - 40) / 365.25) > -0.3
clear = rng.random(night.size) < 0.25
night = night[in_season & clear]
times = 2461000.5 + night + 0.15 + 0.2 * rng.random(night.size)
times = np.round(times, 6)

frequency = np.round(
    np.sort(
        np.concatenate(
            [
                np.linspace(0.0005, 3.1, 300),
                np.linspace(0.98, 1.02, 81),
                np.linspace(0.001, 0.05, 50),
                [1.0, 1.002737909, 2.0, 1 / 365.25, 1 / 29.530589],
            ]
        )
    ),
    9,
)

ones = np.ones_like(times)
origin = times[0]
astropy_power = LombScargle(
    times - origin, ones, fit_mean=False, center_data=False
).power(frequency, method="slow", normalization="standard")
# scipy's own form, divided by half the sum of squares so that it is the same quantity.
scipy_power = scipy.signal.lombscargle(times - origin, ones, 2 * np.pi * frequency) / (
    0.5 * ones.size
)
assert np.max(np.abs(astropy_power - scipy_power)) < 1e-9

np.savetxt(HERE / "window_times.csv", times, fmt="%.6f", header="bjd_tdb", comments="")
with open(HERE / "window_power.csv", "w") as out:
    out.write(
        f"# astropy {astropy.__version__}, numpy {np.__version__}, scipy {scipy.__version__}\n"
    )
    out.write("frequency_per_day,power\n")
    for f, p in zip(frequency, astropy_power):
        out.write(f"{f:.9f},{p:.12f}\n")
