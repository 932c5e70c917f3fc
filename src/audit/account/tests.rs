use super::*;
use crate::audit::{OwedCause, attribute_owed};
use crate::ephemeris::EarthRotation;
use crate::record::{Exposures, VisitId};
use crate::score::fixtures::{night, survey};
use crate::time::Night;

/// A week that the ledger knows; darkness as the sky has it.
fn week(observer: &Observer, survey: &Survey) -> Vec<NightAccount> {
    (0..7)
        .map(|number| {
            let date = night(number);
            let span = Night::of(date, survey.site.longitude);
            let limit = survey.planning.darkness_sun_altitude;
            NightAccount {
                night: date,
                darkness: crate::ephemeris::darkness(observer, span, limit).unwrap(),
                holds: Vec::new(),
                planned: BTreeSet::new(),
                last_plan: None,
                paused: BTreeSet::new(),
                split: None,
            }
        })
        .collect()
}

fn visit(survey: &Survey, number: i64, outcome: Outcome, credit: f64) -> Visit {
    let middle = Night::of(night(number), survey.site.longitude).span;
    let start = middle.start.plus_ms(middle.length_ms() / 2);
    Visit {
        id: VisitId::of(night(number), 1),
        night: night(number),
        kind: EntryKind::Science,
        subject: survey.targets[0].id.clone(),
        began: start,
        exposing: Span::new(start, start.plus_ms(600_000)),
        exposed_s: 600.0,
        planned: Exposures {
            count: 1,
            seconds: 600.0,
        },
        outcome,
        credit,
        airmass: None,
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: None,
        mid_bjd_tdb: None,
        note: String::new(),
    }
}

fn owed(nights: &[NightAccount], visits: &[Visit]) -> BTreeMap<OwedCause, f64> {
    let mut survey = survey();
    survey.targets[0].cadence.every_nights = 1.0;
    survey.targets[0].cadence.visits_per_night = 1;
    survey.targets[0].cadence.total_visits = None;
    let observer = Observer::new(survey.site.clone(), EarthRotation::absent());
    let calendar = Calendar::compute(&survey, &observer, night(0), night(7)).unwrap();
    let span = (night(0), night(7));
    let accounts = Accounts::new((&survey, &observer), &calendar, (nights, visits), span).unwrap();
    let facts = accounts.facts(0);
    attribute_owed(&survey.targets[0].cadence, &facts, None).by_cause
}

#[test]
fn holds_pauses_plans_and_silence_are_told_apart() {
    let survey = survey();
    let observer = Observer::new(survey.site.clone(), EarthRotation::absent());
    let mut nights = week(&observer, &survey);
    let hold = |cause, account: &NightAccount| Hold {
        cause,
        span: account.darkness.unwrap(),
        detail: String::new(),
    };
    nights[1].holds = vec![hold(HoldCause::Weather, &nights[1])];
    nights[2].holds = vec![hold(HoldCause::Instrument, &nights[2])];
    nights[3].paused.insert(survey.targets[0].id.clone());
    let plan = BTreeMap::from([(survey.targets[0].id.clone(), 1)]);
    nights[4].last_plan = Some((nights[4].darkness.unwrap().start, plan));
    nights.remove(6);
    let visits = [
        visit(&survey, 0, Outcome::Done, 1.0),
        visit(&survey, 5, Outcome::Lost(LossCause::Weather), 0.0),
    ];
    assert_eq!(
        owed(&nights, &visits),
        BTreeMap::from([
            (OwedCause::Weather, 2.0),
            // Held by its instrument on one night; on offer and never claimed on another.
            (OwedCause::Instrument, 2.0),
            (OwedCause::Operator, 1.0),
            (OwedCause::Unrecorded, 1.0),
        ])
    );
}

#[test]
fn a_visit_cut_short_is_put_down_to_the_hold_that_cut_it() {
    let survey = survey();
    let observer = Observer::new(survey.site.clone(), EarthRotation::absent());
    let mut nights = week(&observer, &survey);
    let visits: Vec<Visit> = (0..7)
        .map(|number| match number {
            3 => visit(&survey, number, Outcome::Short, 0.0),
            _ => visit(&survey, number, Outcome::Done, 1.0),
        })
        .collect();
    assert_eq!(
        owed(&nights, &visits),
        BTreeMap::from([(OwedCause::Other, 1.0)])
    );
    let end = visits[3].exposing.end;
    nights[3].holds = vec![Hold {
        cause: HoldCause::Weather,
        span: Span::new(end.plus_ms(1000), end.plus_ms(3_600_000)),
        detail: String::new(),
    }];
    assert_eq!(
        owed(&nights, &visits),
        BTreeMap::from([(OwedCause::Weather, 1.0)])
    );
}
