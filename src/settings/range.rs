//! Which numbers a key takes.

use std::fmt;

/// Numbers from `low` to `high`. Never holds what is not finite.
#[derive(Clone, Copy, Debug)]
pub(super) struct Range {
    low: f64,
    high: f64,
    /// `low` itself is outside.
    above: bool,
    /// `high` itself is outside.
    below: bool,
    whole: bool,
    unit: &'static str,
}

impl Range {
    /// Both ends inside.
    pub(super) const fn of(low: f64, high: f64, unit: &'static str) -> Self {
        Range {
            low,
            high,
            above: false,
            below: false,
            whole: false,
            unit,
        }
    }

    /// The low end outside: `0 < x ≤ high` for most quantities that divide.
    pub(super) const fn above(low: f64, high: f64, unit: &'static str) -> Self {
        Range {
            above: true,
            ..Range::of(low, high, unit)
        }
    }

    /// The high end outside: `low ≤ x < high`, as for directions.
    pub(super) const fn below(low: f64, high: f64, unit: &'static str) -> Self {
        Range {
            below: true,
            ..Range::of(low, high, unit)
        }
    }

    /// The same, whole numbers only.
    pub(super) const fn whole(self) -> Self {
        Range {
            whole: true,
            ..self
        }
    }

    pub(super) fn holds(&self, number: f64) -> bool {
        let over = if self.above {
            number > self.low
        } else {
            number >= self.low
        };
        let under = if self.below {
            number < self.high
        } else {
            number <= self.high
        };
        number.is_finite() && over && under && (!self.whole || number.fract() == 0.0)
    }

    /// A number inside, to go on with after a fault.
    pub(super) fn harmless(&self) -> f64 {
        if self.holds(1.0) {
            1.0
        } else if self.holds(self.low) {
            self.low
        } else {
            0.5 * (self.low + self.high)
        }
    }
}

impl fmt::Display for Range {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(if self.whole {
            "a whole number"
        } else {
            "a number"
        })?;
        write!(
            f,
            "{}{}",
            if self.above { " above " } else { " from " },
            self.low
        )?;
        write!(
            f,
            "{}{}",
            if self.below { " to below " } else { " to " },
            self.high
        )?;
        if !self.unit.is_empty() {
            write!(f, " {}", self.unit)?;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ends_are_in_or_out_as_said_and_what_is_not_finite_is_out() {
        let check = |range: Range, number: f64, inside: bool| {
            assert_eq!(range.holds(number), inside, "{range}: {number}");
        };
        check(Range::of(0.0, 1.0, ""), 0.0, true);
        check(Range::of(0.0, 1.0, ""), 1.0, true);
        check(Range::above(0.0, 1.0, ""), 0.0, false);
        check(Range::below(0.0, 360.0, "degrees"), 360.0, false);
        check(Range::of(0.0, 9.0, "").whole(), 1.5, false);
        check(Range::of(0.0, 1.0, ""), f64::NAN, false);
        check(Range::of(0.0, f64::INFINITY, ""), f64::INFINITY, false);
        for range in [
            Range::above(0.0, 0.5, ""),
            Range::of(5.0, 6.0, "").whole(),
            Range::of(-9.0, -3.0, ""),
        ] {
            assert!(range.holds(range.harmless()), "{range}");
        }
        assert_eq!(
            Range::above(0.0, 10.0, "metres").to_string(),
            "a number above 0 to 10 metres"
        );
    }
}
