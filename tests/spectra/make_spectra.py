"""Writes the headers that tests/ledger_import.rs reads: FITS files by a library that is not ours.

Made with astropy 8.0.2 (astropy.io.fits); stars and place names are invented. Run in this folder:
    python3 make_spectra.py
"""

import astropy.units as u
import numpy as np
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.time import Time

# The shipped star KR0016-56 at its catalogue epoch: see config/targets.toml.
STAR = "KR0016-56"


PLACE = SkyCoord(
    ra=4.016378 * u.deg, dec=-56.330106 * u.deg, distance=1000 / 111.428 * u.pc,
    pm_ra_cosdec=1058.27 * u.mas / u.yr, pm_dec=-425.13 * u.mas / u.yr,
    radial_velocity=55.49 * u.km / u.s, obstime=Time(2016.0, format="jyear"),
)


def write(name, cards, data=None):
    header = fits.Header()
    for key, value in cards:
        header[key] = value
    fits.PrimaryHDU(data=data, header=header).writeto(name, overwrite=True, output_verify="silentfix")


write("by_name.fits", [
    ("OBJECT", "kr0016 56"), ("DATE-OBS", "2026-10-01T23:25:00.000"), ("EXPTIME", 600.0),
    ("SNR", 81.5), ("RVERR", 1.25), ("AIRMASS", 1.21), ("TIMESYS", "UTC"),
])
write("long_keywords.fits", [
    ("OBJECT", STAR), ("HIERARCH SPEC MID MJD", 61315.0), ("EXPTIME", 600),
    ("HIERARCH SPEC RV ERR", 1.5),
])
write("tai.fits", [
    ("OBJECT", STAR), ("DATE-AVG", "2026-10-03T23:30:37.000"), ("XPOSURE", 600.0),
    ("TIMESYS", "TAI"),
])
write("mjd.fits", [("OBJECT", STAR), ("MJD-OBS", 61317.5), ("EXPTIME", 900.0)])
write("date_and_time.fits", [
    ("OBJECT", STAR), ("DATE-OBS", "2026-10-05"), ("UT", "23:25:00"), ("EXPTIME", 600.0),
])
write("other_scale.fits", [
    ("OBJECT", STAR), ("DATE-OBS", "2026-10-06T23:25:00"), ("EXPTIME", 600.0), ("TIMESYS", "GPS"),
])
write("no_date.fits", [("OBJECT", STAR), ("EXPTIME", 600.0)])
write("stranger.fits", [
    ("OBJECT", "SOMETHING"), ("RA", 120.0), ("DEC", 89.0),
    ("DATE-OBS", "2026-10-07T23:25:00"), ("EXPTIME", 600.0),
])

moved = PLACE.apply_space_motion(new_obstime=Time("2026-10-08T23:30:00"))
write("by_place.fits", [
    ("RA", moved.ra.to_string(unit=u.hour, sep=":", precision=3)),
    ("DEC", moved.dec.to_string(unit=u.deg, sep=":", precision=2, alwayssign=True)),
    ("DATE-OBS", "2026-10-08T23:25:00"), ("EXPTIME", 600.0),
])
write("place_of_2016.fits", [
    ("RA", PLACE.ra.deg), ("DEC", PLACE.dec.deg),
    ("DATE-OBS", "2026-10-09T23:25:00"), ("EXPTIME", 600.0),
])
write("with_data.fits", [
    ("OBJECT", STAR), ("DATE-OBS", "2026-10-10T23:25:00"), ("EXPTIME", 600.0),
], np.zeros((40, 40), dtype=np.float32))
