//! Why visits are owed.

use std::collections::BTreeMap;

use crate::catalogue::Cadence;
use crate::record::{HoldCause, LossCause};
use crate::time::NightDate;

/// What an owed visit is put down to.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum OwedCause {
    /// Cloud, wind, rain, humidity; also a weather feed that was silent.
    Weather,
    /// Telescope, dome, spectrograph, ledger; a visit refused, unreported or never claimed.
    Instrument,
    /// There was room for it, and other stars were worth more.
    Outbid,
    /// It stood within its limits for too short a time.
    Geometry,
    /// The moon left too short a time.
    Moon,
    /// A person paused it, held the night or stopped the visit.
    Operator,
    /// Lost for a reason that was not told.
    Other,
    /// The ledger has no record of the night: the night keeper did not run.
    Unrecorded,
    /// Accrued since its last visit, whose interval is not over: nothing is wrong.
    NotDue,
}

impl OwedCause {
    /// All causes.
    pub const ALL: [OwedCause; 9] = [
        OwedCause::Weather,
        OwedCause::Instrument,
        OwedCause::Outbid,
        OwedCause::Geometry,
        OwedCause::Moon,
        OwedCause::Operator,
        OwedCause::Other,
        OwedCause::Unrecorded,
        OwedCause::NotDue,
    ];

    /// The label in files and reports.
    pub const fn label(self) -> &'static str {
        match self {
            OwedCause::Weather => "weather",
            OwedCause::Instrument => "instrument",
            OwedCause::Outbid => "outbid",
            OwedCause::Geometry => "geometry",
            OwedCause::Moon => "moon",
            OwedCause::Operator => "operator",
            OwedCause::Other => "other",
            OwedCause::Unrecorded => "unrecorded",
            OwedCause::NotDue => "not_due",
        }
    }
}

impl From<HoldCause> for OwedCause {
    fn from(cause: HoldCause) -> Self {
        match cause {
            HoldCause::Weather | HoldCause::FeedLost => OwedCause::Weather,
            HoldCause::Instrument | HoldCause::Ledger => OwedCause::Instrument,
            HoldCause::Operator => OwedCause::Operator,
        }
    }
}

impl From<LossCause> for OwedCause {
    fn from(cause: LossCause) -> Self {
        match cause {
            LossCause::Weather => OwedCause::Weather,
            LossCause::Instrument | LossCause::Acquisition => OwedCause::Instrument,
            LossCause::Operator => OwedCause::Operator,
            LossCause::Other => OwedCause::Other,
        }
    }
}

/// What the record says of one target on one night.
#[derive(Clone, Debug, PartialEq)]
pub struct NightFacts {
    /// The night.
    pub night: NightDate,
    /// The ledger knows how the night went. Without, minutes and plan below are of no account.
    pub recorded: bool,
    /// The night adds to what the cadence wants: it was ours and the star stood within its limits
    /// at some time of darkness.
    pub accrues: bool,
    /// Credit of the visits of that night.
    pub credit: f64,
    /// Minutes of darkness in which the star stood within its limits, the moon's left aside.
    pub observable_min: f64,
    /// Of these, minutes kept out by the moon.
    pub moon_min: f64,
    /// Of the rest, minutes held, by cause; where several held at once, by the first alone.
    pub held_min: BTreeMap<HoldCause, f64>,
    /// Minutes that a visit takes, with slew and acquisition.
    pub needed_min: f64,
    /// Paused by settings or a person.
    pub paused: bool,
    /// Some revision of the night's plan had it.
    pub planned: bool,
    /// The last revision had a visit that nobody began.
    pub unclaimed: bool,
    /// Causes of the visits that were begun and lost or stopped early, one entry each.
    pub losses: Vec<LossCause>,
    /// Visits refused or never reported.
    pub unanswered: u32,
}

/// Owed visits by cause.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct OwedByCause {
    /// Every cause that has a part, visits.
    pub by_cause: BTreeMap<OwedCause, f64>,
    /// Nights on which the star was due, could have been observed and still was owed visits when
    /// the night was over, each with its weightiest cause, in order.
    pub unserved: Vec<(NightDate, OwedCause)>,
}

impl OwedByCause {
    /// The sum of the parts: what is owed.
    pub fn total(&self) -> f64 {
        self.by_cause.values().sum()
    }
}

/// Parts below this are rounding, visits.
const NOTHING: f64 = 1e-9;

/// Attributes what is owed to causes by going through the nights in order.
///
/// Each night that accrues adds its share of a visit. The night's credit pays that share first, then
/// the oldest debt; credit beyond that is kept and pays what accrues later. What stays unpaid is a
/// debt: as long as less than a night's visits have gathered, it is [`OwedCause::NotDue`]; on the
/// night on which the star becomes due, all that has gathered takes the causes of that night. A debt
/// keeps the cause of the night on which it could first have been paid, until it is paid. So the
/// parts add up to accrued minus credited visits, or to 0 for a star that is ahead. `missing` is what
/// is left to the wanted total: the newest debt beyond it is dropped.
pub fn attribute_owed(
    cadence: &Cadence,
    nights: &[NightFacts],
    missing: Option<f64>,
) -> OwedByCause {
    let visits_per_night = f64::from(cadence.visits_per_night);
    let accrual = visits_per_night / cadence.every_nights;
    let mut account = Account::default();
    let mut owed = OwedByCause::default();
    for facts in nights {
        let accrued = if facts.accrues { accrual } else { 0.0 };
        if let Some(cause) = account.pass_night(facts, accrued, visits_per_night) {
            owed.unserved.push((facts.night, cause));
        }
    }
    if let Some(missing) = missing {
        account.drop_newest_beyond(missing.max(0.0));
    }
    for (cause, amount) in account.debts {
        *owed.by_cause.entry(cause).or_insert(0.0) += amount;
    }
    owed
}

/// Debts, oldest first, and credit in advance; never both.
#[derive(Default)]
struct Account {
    debts: Vec<(OwedCause, f64)>,
    ahead: f64,
}

impl Account {
    /// Takes a night in; the weightiest cause when the star was due and is owed visits after it.
    fn pass_night(
        &mut self,
        facts: &NightFacts,
        accrued: f64,
        visits_per_night: f64,
    ) -> Option<OwedCause> {
        let mut credit = self.ahead + facts.credit;
        let own = (accrued - credit).max(0.0);
        credit -= accrued - own;
        credit = self.pay_oldest(credit);
        self.ahead = credit.max(0.0);
        if own > NOTHING {
            self.debts.push((OwedCause::NotDue, own));
        }
        // Only a night that could have brought a visit explains why none came.
        let due = self.total() + NOTHING >= visits_per_night;
        if !(due && facts.accrues) {
            return None;
        }
        let causes = causes_of(facts);
        self.explain(&causes);
        let weightiest = causes.into_iter().max_by(|a, b| a.1.total_cmp(&b.1));
        weightiest.map(|(cause, _)| cause)
    }

    fn total(&self) -> f64 {
        self.debts.iter().map(|(_, amount)| amount).sum()
    }

    /// Pays debts from the oldest on; what is left of the credit.
    fn pay_oldest(&mut self, mut credit: f64) -> f64 {
        for (_, amount) in &mut self.debts {
            let paid = amount.min(credit.max(0.0));
            *amount -= paid;
            credit -= paid;
        }
        self.debts.retain(|(_, amount)| *amount > NOTHING);
        credit
    }

    /// Gives all debt that was not due yet to these causes.
    fn explain(&mut self, causes: &[(OwedCause, f64)]) {
        let mut explained = Vec::with_capacity(self.debts.len() + causes.len());
        for (cause, amount) in self.debts.drain(..) {
            if cause == OwedCause::NotDue {
                explained.extend(causes.iter().map(|(c, share)| (*c, share * amount)));
            } else {
                explained.push((cause, amount));
            }
        }
        self.debts = explained;
    }

    fn drop_newest_beyond(&mut self, missing: f64) {
        let mut excess = self.total() - missing;
        while excess > 0.0 {
            let Some((cause, amount)) = self.debts.pop() else {
                return;
            };
            if amount > excess {
                self.debts.push((cause, amount - excess));
            }
            excess -= amount;
        }
    }
}

/// Why a due star got too little on a night, as shares that add to 1. The first that applies:
/// paused; a visit begun and lost, or unanswered; a night that was not recorded; too short a time within limits; too short a time
/// left by the moon; too short a time left by holds, or planned and overtaken by them, by the
/// minutes of each; in the last plan and never begun; outbid (never planned, or dropped from a later
/// plan while nothing was held).
fn causes_of(facts: &NightFacts) -> Vec<(OwedCause, f64)> {
    if facts.paused {
        return vec![(OwedCause::Operator, 1.0)];
    }
    let attempts = facts.losses.len() as f64 + f64::from(facts.unanswered);
    if attempts > 0.0 {
        let mut causes: Vec<(OwedCause, f64)> = facts
            .losses
            .iter()
            .map(|loss| ((*loss).into(), 1.0 / attempts))
            .collect();
        if facts.unanswered > 0 {
            let share = f64::from(facts.unanswered) / attempts;
            causes.push((OwedCause::Instrument, share));
        }
        return causes;
    }
    if !facts.recorded {
        return vec![(OwedCause::Unrecorded, 1.0)];
    }
    if facts.observable_min < facts.needed_min {
        return vec![(OwedCause::Geometry, 1.0)];
    }
    let moonless_min = facts.observable_min - facts.moon_min;
    if moonless_min < facts.needed_min {
        return vec![(OwedCause::Moon, 1.0)];
    }
    let held_min: f64 = facts.held_min.values().sum();
    if held_min > 0.0 && (facts.planned || moonless_min - held_min < facts.needed_min) {
        let share = |(cause, minutes): (&HoldCause, &f64)| ((*cause).into(), minutes / held_min);
        return facts.held_min.iter().map(share).collect();
    }
    if facts.unclaimed {
        return vec![(OwedCause::Instrument, 1.0)];
    }
    vec![(OwedCause::Outbid, 1.0)]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::fixtures::{night, target};
    use proptest::prelude::*;

    /// A clear night in which the star was up for five hours and nobody chose it.
    fn clear(number: i64) -> NightFacts {
        NightFacts {
            night: night(number),
            recorded: true,
            accrues: true,
            credit: 0.0,
            observable_min: 300.0,
            moon_min: 0.0,
            held_min: BTreeMap::new(),
            needed_min: 30.0,
            paused: false,
            planned: false,
            unclaimed: false,
            losses: Vec::new(),
            unanswered: 0,
        }
    }

    fn held(number: i64, cause: HoldCause) -> NightFacts {
        NightFacts {
            held_min: BTreeMap::from([(cause, 300.0)]),
            ..clear(number)
        }
    }

    fn visited(number: i64) -> NightFacts {
        NightFacts {
            credit: 1.0,
            planned: true,
            ..clear(number)
        }
    }

    fn every(nights: f64) -> Cadence {
        Cadence {
            every_nights: nights,
            ..target().cadence
        }
    }

    fn check(cadence: &Cadence, nights: &[NightFacts], expected: &[(OwedCause, f64)]) {
        let owed = attribute_owed(cadence, nights, None);
        assert_eq!(
            owed.by_cause.keys().copied().collect::<Vec<_>>(),
            expected.iter().map(|e| e.0).collect::<Vec<_>>()
        );
        for (cause, amount) in expected {
            assert!((owed.by_cause[cause] - amount).abs() < 1e-9, "{owed:?}");
        }
    }

    #[test]
    fn a_nightly_star_that_lost_one_night_to_cloud_owes_it_to_cloud() {
        let nights = [
            visited(0),
            held(1, HoldCause::Weather),
            visited(2),
            visited(3),
        ];
        check(&every(1.0), &nights, &[(OwedCause::Weather, 1.0)]);
    }

    #[test]
    fn nothing_is_wrong_within_the_interval() {
        let nights = [visited(0), clear(1), clear(2)];
        // One visit in three nights: a third each accrued, one credited.
        check(&every(3.0), &nights, &[]);
        let nights = [clear(0), clear(1)];
        check(&every(3.0), &nights, &[(OwedCause::NotDue, 2.0 / 3.0)]);
    }

    #[test]
    fn the_night_that_was_due_decides_and_keeps_its_cause() {
        // Due on the third night, clouded; then two clear nights on which others were worth more.
        let nights = [
            clear(0),
            clear(1),
            held(2, HoldCause::Weather),
            clear(3),
            clear(4),
        ];
        check(
            &every(3.0),
            &nights,
            &[(OwedCause::Weather, 1.0), (OwedCause::Outbid, 2.0 / 3.0)],
        );
    }

    #[test]
    fn each_cause_is_told_from_the_others() {
        let both = |a, b| BTreeMap::from([(HoldCause::Weather, a), (HoldCause::Instrument, b)]);
        let cases: Vec<(NightFacts, Vec<(OwedCause, f64)>)> = vec![
            (clear(0), vec![(OwedCause::Outbid, 1.0)]),
            (
                NightFacts {
                    paused: true,
                    ..clear(0)
                },
                vec![(OwedCause::Operator, 1.0)],
            ),
            (
                NightFacts {
                    observable_min: 20.0,
                    ..clear(0)
                },
                vec![(OwedCause::Geometry, 1.0)],
            ),
            (
                NightFacts {
                    moon_min: 280.0,
                    ..clear(0)
                },
                vec![(OwedCause::Moon, 1.0)],
            ),
            (
                NightFacts {
                    held_min: both(210.0, 70.0),
                    ..clear(0)
                },
                vec![(OwedCause::Weather, 0.75), (OwedCause::Instrument, 0.25)],
            ),
            // An hour of cloud leaves room: it was outbid, unless it had been planned.
            (
                NightFacts {
                    held_min: both(60.0, 0.0),
                    ..clear(0)
                },
                vec![(OwedCause::Outbid, 1.0)],
            ),
            (
                NightFacts {
                    losses: vec![LossCause::Weather, LossCause::Acquisition],
                    ..clear(0)
                },
                vec![(OwedCause::Weather, 0.5), (OwedCause::Instrument, 0.5)],
            ),
            (
                NightFacts {
                    planned: true,
                    unclaimed: true,
                    ..clear(0)
                },
                vec![(OwedCause::Instrument, 1.0)],
            ),
            // Planned in the evening, and given up for a better one.
            (
                NightFacts {
                    planned: true,
                    ..clear(0)
                },
                vec![(OwedCause::Outbid, 1.0)],
            ),
            (
                NightFacts {
                    recorded: false,
                    ..clear(0)
                },
                vec![(OwedCause::Unrecorded, 1.0)],
            ),
        ];
        for (facts, expected) in cases {
            check(&every(1.0), &[facts], &expected);
        }
    }

    fn any_night() -> impl Strategy<Value = NightFacts> {
        (
            (any::<bool>(), 0u8..4, any::<bool>(), any::<bool>()),
            (0.0f64..400.0, 0.0f64..200.0, 0.0f64..200.0, 0.0f64..100.0),
        )
            .prop_map(
                |((accrues, credit, planned, lost), (up, moon, cloud, fault))| NightFacts {
                    accrues,
                    credit: f64::from(credit) / 2.0,
                    observable_min: up,
                    moon_min: moon.min(up),
                    held_min: BTreeMap::from([
                        (HoldCause::Weather, cloud),
                        (HoldCause::Operator, fault),
                    ]),
                    planned,
                    losses: if lost {
                        vec![LossCause::Other]
                    } else {
                        Vec::new()
                    },
                    ..clear(0)
                },
            )
    }

    proptest! {
        #[test]
        fn the_parts_add_up_to_what_is_owed(
            nights in proptest::collection::vec(any_night(), 0..80),
            every_nights in 1.0f64..9.0,
            visits_per_night in 1u32..4,
            missing in proptest::option::of(0.0f64..20.0),
        ) {
            let cadence = Cadence { every_nights, visits_per_night, ..target().cadence };
            let accrued = nights.iter().filter(|n| n.accrues).count() as f64
                * f64::from(visits_per_night) / every_nights;
            let credited: f64 = nights.iter().map(|n| n.credit).sum();
            let expected = (accrued - credited).max(0.0).min(missing.unwrap_or(f64::INFINITY));
            let owed = attribute_owed(&cadence, &nights, missing);
            prop_assert!((owed.total() - expected).abs() < 1e-6, "{owed:?} {expected}");
            prop_assert!(owed.by_cause.values().all(|amount| *amount >= 0.0));
        }
    }
}
