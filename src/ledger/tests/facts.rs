//! Every fact comes back from its row as it went in.

use std::collections::BTreeMap;

use proptest::collection::{btree_map, vec};
use proptest::option;
use proptest::prelude::*;

use crate::catalogue::TargetId;
use crate::ledger::SqliteLedger;
use crate::ledger::rows::{decode, encode, kind_of};
use crate::night::{Fact, Lease, RunMode};
use crate::ports::Ledger;
use crate::record::{
    DarknessSplit, EntryKind, Exposures, HoldCause, IdleCause, LeftOut, LossCause, NightSummary,
    Outcome, PlanCause, PlanRevision, QueueEntry, ValueParts, Visit, VisitCounts, VisitId,
};
use crate::time::{NightDate, Span, Utc};
use crate::units::Angle;
use crate::weather::{Quantity, WeatherSample};

fn utc() -> impl Strategy<Value = Utc> {
    prop_oneof![any::<i64>(), 1_600_000_000_000i64..2_000_000_000_000].prop_map(Utc::from_unix_ms)
}

fn night() -> impl Strategy<Value = NightDate> {
    (0i64..100_000).prop_map(|days| NightDate::parse("1900-01-01").unwrap().plus_nights(days))
}

fn span() -> impl Strategy<Value = Span> {
    (utc(), utc()).prop_map(|(a, b)| Span::new(a, b))
}

/// Every float that equals itself, infinities included.
fn number() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<f64>().prop_filter("comparable", |x| !x.is_nan()),
        -100.0..100.0f64,
        Just(f64::INFINITY),
        Just(-0.0),
    ]
}

fn maybe() -> impl Strategy<Value = Option<f64>> {
    option::of(number())
}

fn words() -> impl Strategy<Value = String> {
    prop_oneof![any::<String>(), "[a-z0-9-]{0,12}"]
}

fn target() -> impl Strategy<Value = TargetId> {
    words().prop_map(|id| TargetId::new(&id))
}

fn kind() -> impl Strategy<Value = EntryKind> {
    prop_oneof![
        Just(EntryKind::Science),
        Just(EntryKind::Standard),
        Just(EntryKind::Calibration)
    ]
}

fn loss() -> impl Strategy<Value = LossCause> {
    prop_oneof![
        Just(LossCause::Weather),
        Just(LossCause::Instrument),
        Just(LossCause::Operator),
        Just(LossCause::Acquisition),
        Just(LossCause::Other)
    ]
}

fn outcome() -> impl Strategy<Value = Outcome> {
    prop_oneof![
        Just(Outcome::Done),
        Just(Outcome::Short),
        loss().prop_map(Outcome::Lost),
        Just(Outcome::Refused),
        Just(Outcome::Unreported)
    ]
}

fn hold() -> impl Strategy<Value = HoldCause> {
    proptest::sample::select(HoldCause::ALL.to_vec())
}

fn idle() -> impl Strategy<Value = IdleCause> {
    proptest::sample::select(IdleCause::ALL.to_vec())
}

fn quantity() -> impl Strategy<Value = Quantity> {
    proptest::sample::select(vec![
        Quantity::RainMmH,
        Quantity::HumidityPercent,
        Quantity::DewPointSpreadK,
        Quantity::WindMS,
        Quantity::GustMS,
        Quantity::CloudPercent,
        Quantity::SkyMinusAirK,
        Quantity::SkyBrightnessMag,
        Quantity::SeeingArcsec,
    ])
}

fn exposures() -> impl Strategy<Value = Exposures> {
    (any::<u32>(), number()).prop_map(|(count, seconds)| Exposures { count, seconds })
}

fn value() -> impl Strategy<Value = ValueParts> {
    proptest::array::uniform8(number()).prop_map(
        |[
            total,
            cadence,
            coverage,
            window,
            quality,
            weight,
            share,
            season,
        ]| ValueParts {
            total,
            cadence,
            coverage,
            window,
            quality,
            weight,
            share,
            season,
        },
    )
}

prop_compose! {
    fn queue_entry()(
        kind in kind(), subject in target(), start in utc(), end in utc(), setup_s in number(),
        exposures in exposures(), maybes in proptest::array::uniform5(maybe()), value in value(),
        because in words(),
    ) -> QueueEntry {
        let [predicted_rv_error_m_s, airmass, altitude_deg, azimuth_deg, moon_separation_deg] =
            maybes;
        QueueEntry {
            kind, subject, start, end, setup_s, exposures, predicted_rv_error_m_s, airmass,
            altitude_deg, azimuth_deg, moon_separation_deg, value, because,
        }
    }
}

fn plan_cause() -> impl Strategy<Value = PlanCause> {
    prop_oneof![
        Just(PlanCause::Evening),
        Just(PlanCause::HoldEnded),
        Just(PlanCause::VisitDeviated),
        words().prop_map(PlanCause::Request),
        Just(PlanCause::SettingsChanged),
        Just(PlanCause::WeatherChanged),
        Just(PlanCause::Recovered)
    ]
}

prop_compose! {
    fn plan()(
        night in night(), number in any::<u32>(), made_at in utc(), from in utc(),
        cause in plan_cause(), entries in vec(queue_entry(), 0..4),
        left_out in vec((target(), words()), 0..4), value in number(), bound in maybe(),
    ) -> PlanRevision {
        let left_out = left_out.into_iter().map(|(target, because)| LeftOut { target, because });
        PlanRevision {
            night, number, made_at, from, cause, entries, left_out: left_out.collect(), value, bound,
        }
    }
}

prop_compose! {
    fn visit()(
        id in words(), night in night(), kind in kind(), subject in target(), began in utc(),
        exposing in span(), exposed_s in number(), planned in exposures(), outcome in outcome(),
        credit in number(), maybes in proptest::array::uniform5(maybe()), note in words(),
    ) -> Visit {
        let [airmass, snr, rv_error_m_s, predicted_rv_error_m_s, mid_bjd_tdb] = maybes;
        Visit {
            id: VisitId(id), night, kind, subject, began, exposing, exposed_s, planned, outcome,
            credit, airmass, snr, rv_error_m_s, predicted_rv_error_m_s, mid_bjd_tdb, note,
        }
    }
}

prop_compose! {
    fn summary()(
        night in night(), darkness in option::of(span()),
        plain in proptest::array::uniform3(any::<i64>()),
        held_ms in btree_map(hold(), any::<i64>(), 0..5),
        idle_ms in btree_map(idle(), any::<i64>(), 0..4),
        counts in proptest::array::uniform5(any::<u32>()),
    ) -> NightSummary {
        let [exposing_ms, overhead_ms, calibration_ms] = plain;
        let [done, short, lost, refused, unreported] = counts;
        NightSummary {
            night,
            darkness,
            split: DarknessSplit { exposing_ms, overhead_ms, calibration_ms, held_ms, idle_ms },
            visits: VisitCounts { done, short, lost, refused, unreported },
        }
    }
}

prop_compose! {
    fn sample()(
        at in utc(), values in btree_map(quantity(), number(), 0..9), wind in maybe(),
        safe in any::<Option<bool>>(),
    ) -> WeatherSample {
        let values: BTreeMap<Quantity, f64> = values;
        WeatherSample { at, values, wind_from: wind.map(Angle::from_rad), safe }
    }
}

prop_compose! {
    fn lease()(
        visit in words(), entry in queue_entry(), revision in any::<u32>(), claim_key in words(),
        holder in words(), granted in utc(), expires in utc(),
    ) -> Lease {
        Lease { visit: VisitId(visit), entry, revision, claim_key, holder, granted, expires }
    }
}

fn mode() -> impl Strategy<Value = RunMode> {
    prop_oneof![
        Just(RunMode::Real),
        Just(RunMode::Rehearsal),
        Just(RunMode::InventedClock)
    ]
}

fn told_by_people() -> impl Strategy<Value = Fact> {
    prop_oneof![
        (utc(), target(), words(), words()).prop_map(|(at, target, by, reason)| {
            Fact::TargetPaused {
                at,
                target,
                by,
                reason,
            }
        }),
        (utc(), target(), words()).prop_map(|(at, target, by)| Fact::TargetResumed {
            at,
            target,
            by
        }),
        (utc(), target(), utc(), words(), words()).prop_map(|(at, target, until, by, reason)| {
            Fact::TargetUrgent {
                at,
                target,
                until,
                by,
                reason,
            }
        }),
        (utc(), words(), loss(), words()).prop_map(|(at, visit, cause, by)| Fact::VisitSkipped {
            at,
            visit: VisitId(visit),
            cause,
            by
        }),
        (utc(), words(), words()).prop_map(|(at, by, text)| Fact::Note { at, by, text }),
    ]
}

fn told_by_the_night() -> impl Strategy<Value = Fact> {
    prop_oneof![
        (night(), span(), option::of(span()), any::<bool>(), mode()).prop_map(
            |(night, span, darkness, ours, mode)| Fact::NightOpened {
                night,
                span,
                darkness,
                ours,
                mode
            }
        ),
        plan().prop_map(Fact::PlanPublished),
        (utc(), hold(), words()).prop_map(|(at, cause, detail)| Fact::HoldBegan {
            at,
            cause,
            detail
        }),
        (utc(), hold()).prop_map(|(at, cause)| Fact::HoldEnded { at, cause }),
        lease().prop_map(Fact::LeaseGranted),
        (words(), utc(), utc()).prop_map(|(visit, at, expires)| Fact::LeaseExtended {
            visit: VisitId(visit),
            at,
            expires
        }),
        (utc(), words(), visit()).prop_map(|(at, report_key, visit)| Fact::VisitEnded {
            at,
            report_key,
            visit
        }),
        sample().prop_map(Fact::WeatherNoted),
        (utc(), any::<i64>()).prop_map(|(at, by_ms)| Fact::ClockStepped { at, by_ms }),
        utc().prop_map(|at| Fact::Resumed { at }),
        utc().prop_map(|at| Fact::DarknessBegan { at }),
        utc().prop_map(|at| Fact::DarknessEnded { at }),
        summary().prop_map(Fact::NightClosed),
    ]
}

pub(super) fn any_fact() -> impl Strategy<Value = Fact> {
    prop_oneof![told_by_people(), told_by_the_night()]
}

/// Gives each visit, lease, report and revision a name of its own, as the night does.
fn distinct(facts: &mut [Fact]) {
    for (number, fact) in (0u32..).zip(facts) {
        match fact {
            Fact::PlanPublished(plan) => plan.number = number,
            Fact::LeaseGranted(lease) => lease.visit.0 = format!("lease {number}"),
            Fact::VisitEnded { report_key, .. } => report_key.push_str(&number.to_string()),
            _ => {}
        }
    }
}

proptest! {
    #[test]
    fn a_row_gives_its_fact_back(fact in any_fact()) {
        let body = encode(&fact).unwrap();
        prop_assert_eq!(decode(kind_of(&fact), &body).unwrap(), fact);
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn a_ledger_gives_its_facts_back(mut facts in vec(any_fact(), 0..30), night in night()) {
        distinct(&mut facts);
        let mut ledger = SqliteLedger::in_memory().unwrap();
        let (first, second) = facts.split_at(facts.len() / 2);
        ledger.append(night, first).unwrap();
        ledger.append(night, second).unwrap();
        prop_assert_eq!(&ledger.facts(night).unwrap(), &facts);
        prop_assert!(ledger.facts(night.plus_nights(1)).unwrap().is_empty());

        let differs = ledger.check().unwrap().faults.into_iter().find(|f| f.contains("journal"));
        prop_assert_eq!(differs, None);

        // The last word on each visit stands, exactly as it was told.
        let mut last: BTreeMap<VisitId, Visit> = BTreeMap::new();
        for fact in &facts {
            if let Fact::VisitEnded { visit, .. } = fact {
                last.insert(visit.id.clone(), visit.clone());
            }
        }
        let standing = ledger.visits(None).unwrap();
        let standing: BTreeMap<VisitId, Visit> =
            standing.into_iter().map(|visit| (visit.id.clone(), visit)).collect();
        prop_assert_eq!(standing, last);
    }
}
