"""The night's grid against the same work through vectorised C ERFA, on one machine in one run.

    pip install pyerfa numpy
    python3 benches/pyerfa_grid.py

runs the criterion bench `night_grid`, then computes altitude, azimuth, airmass and separation from
the Moon for the same 120 stars at the same 600 minutes through `apco13` + `atciq` + `atioq`, and
prints both times, their ratio and the greatest differences. Both run on one thread.
"""

import json
import pathlib
import subprocess
import time

import erfa
import numpy as np

ROOT = pathlib.Path(__file__).resolve().parent.parent
INSTANTS, STARS = 600, 120
LAT, LON, HEIGHT = np.radians(39.4), np.radians(-116.3), 1950.0
DUT1, XP, YP = -0.05, np.radians(0.15 / 3600), np.radians(0.3 / 3600)
MAS = np.radians(1 / 3.6e6)
LIGHT_AU_D = 173.1446326742403

i = np.arange(STARS)
share = (i + 0.5) / STARS
RA = np.radians(np.mod(i * 137.507764, 360.0))
DEC = np.arcsin(2 * share - 1)
DEC[0] = LAT
PMRA = 5000.0 * (1 - 2 * share) * MAS / np.cos(DEC)
PMDEC = 3000.0 * share * MAS
PARALLAX = 500.0 * share / 1000
VELOCITY = 100.0 * (share - 0.5)
UTC1 = 2461376.5  # 2026-12-02
UTC2 = (2 * 60 + np.arange(INSTANTS)) / 1440


def moon_place(astrom, tt1, tt2):
    """Apparent topocentric azimuth and altitude of the Moon."""
    _, earth = erfa.epv00(tt1, tt2)
    moon = erfa.moon98(tt1, tt2)
    vector = moon["p"] + earth["p"] - astrom["eb"]
    days = np.linalg.norm(vector, axis=-1) / LIGHT_AU_D
    vector = vector - days[:, None] * (earth["v"] + moon["v"])
    natural = vector / np.linalg.norm(vector, axis=-1)[:, None]
    proper = erfa.ab(natural, astrom["v"], astrom["em"], astrom["bm1"])
    ra, dec = erfa.c2s(erfa.rxp(astrom["bpn"], proper))
    az, zd, *_ = erfa.atioq(ra, dec, astrom)
    return az, np.pi / 2 - zd


def grid():
    astrom, _ = erfa.apco13(UTC1, UTC2, DUT1, LON, LAT, HEIGHT, XP, YP, 0.0, 0.0, 0.0, 0.8)
    tt1, tt2 = erfa.taitt(*erfa.utctai(UTC1, UTC2))
    moon_az, moon_alt = moon_place(astrom, tt1, tt2)
    column = [v[:, None] for v in (RA, DEC, PMRA, PMDEC, PARALLAX, VELOCITY)]
    ri, di = erfa.atciq(*column, astrom[None, :])
    az, zd, *_ = erfa.atioq(ri, di, astrom[None, :])
    alt = np.pi / 2 - zd
    sine = np.sin(alt)
    # Young 1994, Appl. Opt. 33, 1108.
    airmass = ((1.002432 * sine + 0.148386) * sine + 0.0096467) / (
        ((sine + 0.149864) * sine + 0.0102963) * sine + 0.000303978
    )
    airmass[sine < 0] = np.inf
    separation = erfa.seps(az, alt, moon_az[None, :], moon_alt[None, :])
    return np.degrees(alt), np.degrees(az), airmass, np.degrees(separation)


def best_time(repeats=15):
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        grid()
        times.append(time.perf_counter() - start)
    return np.median(times), min(times)


def main():
    subprocess.run(["cargo", "bench", "--bench", "night_grid", "--", "night_grid"], cwd=ROOT, check=True)
    estimates = json.loads((ROOT / "target/criterion/night_grid_600x120/new/estimates.json").read_text())
    ours = estimates["median"]["point_estimate"] / 1e9
    median, least = best_time()
    alt, az, airmass, separation = grid()
    data = np.fromfile(ROOT / "target/night_grid.f64").reshape(STARS, 4, INSTANTS)
    on_sky = erfa.seps(*map(np.radians, (data[:, 1], data[:, 0], az, alt)))
    up = (alt > 0) & (data[:, 0] > 0)
    print(f"pyerfa {erfa.__version__} (ERFA {erfa.version.erfa_version}), numpy {np.__version__}")
    print(f"pyerfa     {median * 1e3:8.2f} ms (median; least {least * 1e3:.2f})")
    print(f"night grid {ours * 1e3:8.2f} ms (median)")
    print(f"ratio      {median / ours:8.1f}")
    print(f"greatest difference on the sky      {np.degrees(on_sky.max()) * 3600:.6f} arcsec")
    print(f"greatest difference in separation   {abs(separation - data[:, 3]).max() * 3600:.6f} arcsec")
    print(f"greatest difference in airmass      {abs(airmass[up] - data[:, 2][up]).max():.2e}")
    print(f"highest altitude                    {alt.max():.4f} degrees")


if __name__ == "__main__":
    main()
