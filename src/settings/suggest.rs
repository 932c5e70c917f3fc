//! What an unknown key may have been meant to be.

/// Ends of keys that name a unit, and the unit in words. Longer ones first, since `_mas_yr` ends in
/// no other but `_km_s` ends in `_s`.
const UNITS: &[(&str, &str)] = &[
    (
        "_photons_s_m2_nm",
        "photons per second, square metre and nanometre",
    ),
    ("_mag_arcsec2", "magnitudes per square arcsecond"),
    ("_mag_airmass", "magnitudes per airmass"),
    ("_arcsec_yr", "arcseconds a year"),
    ("_bjd_tdb", "days, BJD_TDB"),
    ("_mas_yr", "milliarcseconds a year"),
    ("_deg_s2", "degrees per second squared"),
    ("_percent", "per cent"),
    ("_arcsec", "arcseconds"),
    ("_arcmin", "arcminutes"),
    ("_nights", "nights"),
    ("_hours", "hours"),
    ("_deg_s", "degrees per second"),
    ("_km_s", "kilometres per second"),
    ("_km_h", "kilometres per hour"),
    ("_msun", "solar masses"),
    ("_rsun", "solar radii"),
    ("_days", "days"),
    ("_m_s", "metres per second"),
    ("_kmh", "kilometres per hour"),
    ("_mph", "miles per hour"),
    ("_deg", "degrees"),
    ("_rad", "radians"),
    ("_mas", "milliarcseconds"),
    ("_hpa", "hectopascal"),
    ("_mbar", "millibar"),
    ("_min", "minutes"),
    ("_sec", "seconds"),
    ("_kms", "kilometres per second"),
    ("_km", "kilometres"),
    ("_cm", "centimetres"),
    ("_mm", "millimetres"),
    ("_nm", "nanometres"),
    ("_um", "micrometres"),
    ("_ms", "milliseconds"),
    ("_kn", "knots"),
    ("_ft", "feet"),
    ("_in", "inches"),
    ("_pa", "pascal"),
    ("_jd", "days, Julian date"),
    ("_yr", "years"),
    ("_h", "hours"),
    ("_s", "seconds"),
    ("_d", "days"),
    ("_m", "metres"),
    ("_k", "kelvin"),
    ("_c", "degrees Celsius"),
    ("_f", "degrees Fahrenheit"),
    ("_e", "electrons"),
];

/// Keys closer than this (Jaro–Winkler, 1 is equal) are taken for a slip of the pen.
const NEAR: f64 = 0.85;

/// What to tell a person who wrote a key that does not exist here.
pub(super) fn for_unknown(key: &str, known: &[&'static str]) -> String {
    let (stem, unit) = split_unit(key);
    for candidate in known {
        let (other_stem, other_unit) = split_unit(candidate);
        if stem == other_stem && *candidate != key && other_unit.is_some() {
            let wanted = other_unit.unwrap_or_default();
            return match unit {
                Some(found) => format!(
                    "this is in {found}, but {candidate} in {wanted} is wanted: convert the value \
                     and rename the key"
                ),
                None => format!("write {candidate}, with the value in {wanted}"),
            };
        }
    }
    let near = known
        .iter()
        .map(|candidate| (strsim::jaro_winkler(key, candidate), candidate))
        .filter(|(likeness, _)| *likeness >= NEAR)
        .max_by(|a, b| a.0.total_cmp(&b.0));
    match near {
        Some((_, candidate)) => format!("did you mean {candidate}?"),
        None if known.is_empty() => "nothing is known here: remove it".to_owned(),
        None => format!("remove it; known here: {}", sorted(known).join(", ")),
    }
}

fn sorted(known: &[&'static str]) -> Vec<&'static str> {
    let mut names = known.to_vec();
    names.sort_unstable();
    names.dedup();
    names
}

fn split_unit(key: &str) -> (&str, Option<&'static str>) {
    UNITS
        .iter()
        .find_map(|(end, unit)| key.strip_suffix(end).map(|stem| (stem, Some(*unit))))
        .unwrap_or((key, None))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_the_unit_or_the_near_key() {
        let known = ["aperture_m", "latitude_deg", "slew_rate_deg_s"];
        let check = |key: &str, part: &str| {
            let hint = for_unknown(key, &known);
            assert!(hint.contains(part), "{key}: {hint}");
        };
        check(
            "aperture_cm",
            "this is in centimetres, but aperture_m in metres",
        );
        check("aperture", "write aperture_m, with the value in metres");
        check("lattitude_deg", "did you mean latitude_deg?");
        check(
            "colour",
            "known here: aperture_m, latitude_deg, slew_rate_deg_s",
        );
    }
}
