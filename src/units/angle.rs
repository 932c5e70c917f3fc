//! Plane angles.

use std::f64::consts::{PI, TAU};
use std::ops::{Add, Neg, Sub};

/// A plane angle. Kept in radians inside; made from and read as the unit that the name says.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd, Default)]
pub struct Angle(f64);

impl Angle {
    /// Zero.
    pub const ZERO: Angle = Angle(0.0);

    /// An angle of so many radians.
    pub const fn from_rad(rad: f64) -> Self {
        Angle(rad)
    }

    /// An angle of so many degrees.
    pub const fn from_deg(deg: f64) -> Self {
        Angle(deg * (PI / 180.0))
    }

    /// An angle of so many seconds of arc.
    pub const fn from_arcsec(arcsec: f64) -> Self {
        Angle(arcsec * (PI / 648_000.0))
    }

    /// In radians.
    pub const fn rad(self) -> f64 {
        self.0
    }

    /// In degrees.
    pub const fn deg(self) -> f64 {
        self.0 * (180.0 / PI)
    }

    /// In seconds of arc.
    pub const fn arcsec(self) -> f64 {
        self.0 * (648_000.0 / PI)
    }

    /// The same direction in 0 ≤ angle < 2π.
    pub fn wrapped_positive(self) -> Self {
        let turned = self.0.rem_euclid(TAU);
        // A tiny negative angle rounds up to a full turn, which is the same direction as zero.
        Angle(if turned >= TAU { 0.0 } else { turned })
    }

    /// The same direction in −π ≤ angle < π.
    pub fn wrapped_signed(self) -> Self {
        Angle((self + Angle(PI)).wrapped_positive().0 - PI)
    }
}

impl Add for Angle {
    type Output = Angle;
    fn add(self, other: Angle) -> Angle {
        Angle(self.0 + other.0)
    }
}

impl Sub for Angle {
    type Output = Angle;
    fn sub(self, other: Angle) -> Angle {
        Angle(self.0 - other.0)
    }
}

impl Neg for Angle {
    type Output = Angle;
    fn neg(self) -> Angle {
        Angle(-self.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn wraps_at_both_ends() {
        let check = |deg: f64, positive: f64, signed: f64| {
            let angle = Angle::from_deg(deg);
            assert!(
                (angle.wrapped_positive().deg() - positive).abs() < 1e-12,
                "{deg}"
            );
            assert!(
                (angle.wrapped_signed().deg() - signed).abs() < 1e-12,
                "{deg}"
            );
        };
        check(0.0, 0.0, 0.0);
        check(360.0, 0.0, 0.0);
        check(-1.0, 359.0, -1.0);
        check(180.0, 180.0, -180.0);
        check(540.0, 180.0, -180.0);
        assert_eq!(Angle::from_rad(-1e-30).wrapped_positive(), Angle::ZERO);
    }
}
