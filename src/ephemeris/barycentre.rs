//! Times at the barycentre of the solar system.

use super::scales::{JulianDate, Tdb};

/// Barycentric Julian date in TDB: the time of observation in TDB plus the light-time to the
/// barycentre (Eastman, Siverd & Gaudi 2010, PASP 122, 935; the Shapiro and Einstein terms beyond
/// TDB itself are left out, below 0.1 ms off the Sun's limb).
pub(crate) fn bjd_tdb(tdb: Tdb, light_time_s: f64) -> JulianDate {
    tdb.0.plus_s(light_time_s)
}
