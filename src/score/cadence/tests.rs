use super::*;
use crate::score::fixtures::{at, night, target, visit};
use proptest::prelude::*;

fn standing(credited: Vec<crate::score::CreditedVisit>, accrued_nights: u32) -> Standing {
    Standing {
        credited,
        accrued_nights,
        remaining_nights: 50,
    }
}

fn term(target: &Target, standing: &Standing, days: f64) -> Result<f64, NotWanted> {
    CadenceTerm::new(target, standing, night(days.floor() as i64), 0.5).at(at(days))
}

/// Visits of whole credit every so often, with the nights that would have accrued them.
fn history() -> impl Strategy<Value = Standing> {
    (
        proptest::collection::vec((1.0f64..9.0, 0.05f64..=1.0), 0..8),
        0u32..60,
    )
        .prop_map(|(steps, accrued)| {
            let mut days = 0.0;
            let credited = steps.into_iter().map(|(step, credit)| {
                days += step;
                visit(days, credit)
            });
            standing(credited.collect(), accrued)
        })
}

proptest! {
    #[test]
    fn never_falls_with_time_and_stays_within_its_bounds(
        standing in history(),
        every in 1.0f64..12.0,
        waits in (0.0f64..60.0, 0.0f64..60.0),
    ) {
        let mut star = target();
        star.cadence.every_nights = every;
        let last = standing.credited.last().map_or(0.0, |v| {
            (v.mid - at(0.0)) as f64 / DAY_MS as f64
        });
        let (early, late) = (last + waits.0.min(waits.1), last + waits.0.max(waits.1));
        // A night's visits of whole credit refuse the star until the next night: that counts as 0.
        let (a, b) = (
            term(&star, &standing, early).unwrap_or(0.0),
            term(&star, &standing, late).unwrap_or(0.0),
        );
        prop_assert!(a >= 0.0 && b <= CADENCE_CAP);
        prop_assert!(a <= b + 1e-9, "{a} at {early}, {b} at {late}");
    }

    #[test]
    fn never_falls_with_what_is_owed(standing in history(), more in 0u32..40, wait in 0.0f64..30.0) {
        let star = target();
        let mut richer = standing.clone();
        richer.accrued_nights += more;
        let days = 80.0 + wait;
        prop_assert!(owed(&star, &richer) >= owed(&star, &standing));
        prop_assert!(term(&star, &richer, days).unwrap() >= term(&star, &standing, days).unwrap());
    }

    #[test]
    fn is_zero_right_after_a_whole_visit_whatever_is_owed(accrued in 0u32..500, days in 0.0f64..50.0) {
        let star = target();
        let served = standing(vec![visit(days, 1.0)], accrued);
        let same_night = term(&star, &served, days);
        prop_assert_eq!(same_night, Err(NotWanted::ServedTonight { wanted: 1 }));
        // Seen from the next night's bookkeeping the clock stands at zero too.
        let next = CadenceTerm::new(&star, &served, night(days.floor() as i64 + 1), 0.5);
        prop_assert!(next.at(at(days)).unwrap() < 1e-9);
    }
}

#[test]
fn rises_through_one_when_the_interval_is_reached() {
    let star = target();
    // In balance: one visit, three nights accrued since.
    let balanced = standing(vec![visit(0.5, 1.0)], 3);
    for (days, expected) in [(1.5, 1.0 / 3.0), (2.0, 0.5), (3.5, 1.0)] {
        assert!((term(&star, &balanced, days).unwrap() - expected).abs() < 1e-9);
    }
    let late = term(&star, &balanced, 3.5 + 3.0).unwrap();
    assert!((late - (1.0 + 2f64.ln())).abs() < 1e-9);
    assert_eq!(term(&star, &balanced, 1000.0).unwrap(), CADENCE_CAP);
    assert!((overdue(&star, &balanced, at(6.5)) - 2.0).abs() < 1e-9);
}

#[test]
fn a_star_never_visited_is_due_and_rises_with_what_it_is_owed() {
    let star = target();
    let at_night = |accrued: u32| term(&star, &standing(Vec::new(), accrued), 0.5).unwrap();
    assert_eq!(at_night(0), 1.0);
    assert_eq!(at_night(3), 1.0);
    assert!(at_night(9) > at_night(6) && at_night(6) > 1.0);
    assert_eq!(owed(&star, &standing(Vec::new(), 9)), 3.0);
}

#[test]
fn partial_visits_count_in_part() {
    let star = target();
    let half = standing(vec![visit(0.5, 1.0), visit(3.5, 0.5)], 4);
    assert!((balance(&star, &half) - (4.0 / 3.0 - 1.5)).abs() < 1e-12);
    // Half of the clock's one interval is left, and runs on.
    assert!((overdue(&star, &half, at(3.5)) - 0.5).abs() < 1e-9);
    assert!((overdue(&star, &half, at(5.0)) - 1.0).abs() < 1e-9);
    // In the same night the missing half of the visit is still wanted.
    let whole = 1.0 + (3.1f64 / 3.0).ln();
    assert!((term(&star, &half, 3.6).unwrap() - 0.5 * whole).abs() < 1e-9);
}

#[test]
fn several_visits_a_night_wait_for_their_separation_and_are_worth_less() {
    let mut star = target();
    star.cadence.every_nights = 1.0;
    star.cadence.visits_per_night = 3;
    star.cadence.separation_min = 60.0;
    let before = vec![visit(0.5, 1.0), visit(0.6, 1.0), visit(0.7, 1.0)];
    let with = |tonight: &[f64]| {
        let mut credited = before.clone();
        credited.extend(tonight.iter().map(|days| visit(*days, 1.0)));
        standing(credited, 1)
    };
    let first = term(&star, &with(&[]), 1.7).unwrap();
    assert!((first - 1.0).abs() < 1e-9);
    let until = at(1.5).plus_ms(3_600_000);
    assert_eq!(
        term(&star, &with(&[1.5]), 1.51),
        Err(NotWanted::TooSoon { until })
    );
    assert!((term(&star, &with(&[1.5]), 1.7).unwrap() - 0.5).abs() < 1e-9);
    assert!((term(&star, &with(&[1.5, 1.6]), 1.7).unwrap() - 0.5).abs() < 1e-9);
    assert_eq!(
        term(&star, &with(&[1.5, 1.6, 1.7]), 1.9),
        Err(NotWanted::ServedTonight { wanted: 3 })
    );
}

#[test]
fn says_why_a_star_is_not_wanted() {
    let check = |change: &dyn Fn(&mut Target), standing: &Standing, expected: NotWanted| {
        let mut star = target();
        change(&mut star);
        assert_eq!(term(&star, standing, 20.5), Err(expected));
    };
    let none = standing(Vec::new(), 9);
    check(&|star| star.paused = true, &none, NotWanted::Paused);
    let first = night(21);
    check(
        &|star| star.cadence.first_night = Some(first),
        &none,
        NotWanted::NotYet { first },
    );
    let last = night(19);
    check(
        &|star| star.cadence.last_night = Some(last),
        &none,
        NotWanted::Over { last },
    );
    let three = standing((0..3).map(|i| visit(f64::from(i) + 0.5, 1.0)).collect(), 30);
    check(
        &|star| star.cadence.total_visits = Some(3),
        &three,
        NotWanted::Complete {
            credited: 3.0,
            total: 3,
        },
    );
    let mut star = target();
    star.cadence.total_visits = Some(5);
    assert_eq!(owed(&star, &three), 2.0);
}
