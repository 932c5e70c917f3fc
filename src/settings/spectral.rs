//! Effective temperature of a main-sequence star from its spectral class.

/// (class, temperature in kelvin), F0 as 0, F1 as 1, … G0 as 10, K0 as 20, M0 as 30, L0 as 40.
/// Values of Pecaut & Mamajek 2013, ApJS 208, 9, table 5 (mean dwarf sequence), written from memory
/// and rounded to ten kelvin; straight lines between.
const DWARFS: &[(f64, f64)] = &[
    (0.0, 7220.0),
    (5.0, 6550.0),
    (8.0, 6180.0),
    (10.0, 5930.0),
    (12.0, 5770.0),
    (15.0, 5660.0),
    (18.0, 5480.0),
    (20.0, 5270.0),
    (22.0, 5100.0),
    (23.0, 4830.0),
    (24.0, 4600.0),
    (25.0, 4440.0),
    (27.0, 4050.0),
    (30.0, 3850.0),
    (31.0, 3660.0),
    (32.0, 3560.0),
    (33.0, 3430.0),
    (34.0, 3210.0),
    (35.0, 3060.0),
    (36.0, 2810.0),
    (37.0, 2680.0),
    (38.0, 2570.0),
    (39.0, 2380.0),
    (40.0, 2270.0),
];

/// Temperature of a class like `M4`, `M3.5 V`, `K7Ve`; `None` for what is none, or lies outside F0
/// to L0. Anything after the number is passed over.
pub(super) fn temperature_k(class: &str) -> Option<f64> {
    let class = class.trim();
    let letter = class.chars().next()?;
    let first = match letter.to_ascii_uppercase() {
        'F' => 0.0,
        'G' => 10.0,
        'K' => 20.0,
        'M' => 30.0,
        'L' => 40.0,
        _ => return None,
    };
    let number: String = class
        .chars()
        .skip(1)
        .take_while(|c| c.is_ascii_digit() || *c == '.')
        .collect();
    let subclass: f64 = number.parse().ok().filter(|n| (0.0..10.0).contains(n))?;
    interpolate(first + subclass)
}

fn interpolate(x: f64) -> Option<f64> {
    let after = DWARFS.partition_point(|(at, _)| *at < x);
    let (high, t_high) = *DWARFS.get(after)?;
    if high == x {
        return Some(t_high);
    }
    let (low, t_low) = *DWARFS.get(after.checked_sub(1)?)?;
    Some(t_low + (t_high - t_low) * (x - low) / (high - low))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_classes_and_refuses_the_rest() {
        let check = |class: &str, expected: Option<f64>| {
            assert_eq!(temperature_k(class), expected, "{class}");
        };
        check("G2V", Some(5770.0));
        check("M4", Some(3210.0));
        check(" m3.5 Ve", Some(3320.0));
        check("F0", Some(7220.0));
        check("L0", Some(2270.0));
        check("L1", None);
        check("A0V", None);
        check("M", None);
        check("M12", None);
        check("", None);
        check("é", None);
    }
}
